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

// Anything but returning or a coldpin::Error escapes.
void read_or_refuse(const Reader& reader, const std::string& bytes);

}  // namespace coldpin::tests
