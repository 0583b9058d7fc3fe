// The same readers under clang's coverage-guided fuzzer: the first byte chooses the reader.
#include <cstdint>
#include <string>

#include "readers.h"

extern "C" int LLVMFuzzerTestOneInput(const std::uint8_t* data, std::size_t size) {
    if (size == 0) return 0;
    const auto& all = coldpin::tests::readers();
    coldpin::tests::read_or_refuse(all[data[0] % all.size()],
                                   std::string(reinterpret_cast<const char*>(data) + 1, size - 1));
    return 0;
}
