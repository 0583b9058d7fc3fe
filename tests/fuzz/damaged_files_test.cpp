// A short, repeatable round of the fuzz targets; a long one is `bash tests/fuzz/run.sh SECONDS`.
#include <random>
#include <string>

#include <gtest/gtest.h>

#include "readers.h"

namespace coldpin::tests {
namespace {

std::string damaged(std::string bytes, std::mt19937& random) {
    const auto below = [&](std::size_t end) {
        return std::uniform_int_distribution<std::size_t>(0, end - 1)(random);
    };
    for (std::size_t round = 1 + below(4); round > 0 && bytes.size() > 1; --round) {
        const std::size_t at = below(bytes.size());
        switch (below(4)) {
            case 0:
                bytes[at] = static_cast<char>(below(256));
                break;
            case 1:
                bytes.erase(at, 1 + below(64));
                break;
            case 2:
                bytes.insert(at, bytes.substr(below(bytes.size()), 1 + below(64)));
                break;
            default:
                bytes.resize(at);
        }
    }
    return bytes;
}

TEST(DamagedFilesTest, EveryReaderReturnsOrRefuses) {
    for (const Reader& reader : readers()) {
        ASSERT_FALSE(reader.seeds.empty()) << reader.name;
        std::mt19937 random(20);
        for (const std::string& seed : reader.seeds)
            for (int round = 0; round < 150; ++round) {
                SCOPED_TRACE(reader.name + ", round " + std::to_string(round));
                EXPECT_NO_THROW(read_or_refuse(reader, damaged(seed, random)));
            }
    }
}

TEST(DamagedFilesTest, TheSeedsThemselvesAreRead) {
    for (const Reader& reader : readers()) {
        if (reader.name == "sound file" || reader.name == "description")
            continue;  // cut short; truth.json beside
        for (const std::string& seed : reader.seeds) EXPECT_NO_THROW(reader.read(seed)) << reader.name;
    }
}

}  // namespace
}  // namespace coldpin::tests
