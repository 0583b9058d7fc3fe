// Every reader of a file that may come from anywhere, as fuzz targets: whatever the bytes, a reader returns
// or throws coldpin::Error.
#pragma once

#include <cstddef>
#include <cstdint>
#include <functional>
#include <string>
#include <vector>

namespace coldpin::tests {

struct Reader {
    std::string name;
    std::function<void(const std::string& bytes)> read;
    std::vector<std::string> seeds;  // whole, valid inputs
};

const std::vector<Reader>& readers();

// True when the reader returned or refused; anything else escapes.
bool returns_or_refuses(const Reader& reader, const std::string& bytes);

}  // namespace coldpin::tests
