// Whatever a damaged file holds, it is read or refused with a place and a reason; nothing else happens.
#include <algorithm>
#include <cctype>
#include <filesystem>
#include <random>
#include <string>
#include <vector>

#include <gtest/gtest.h>

#include "coldpin/profile/device_profile.h"
#include "coldpin/profile/rig_file.h"
#include "coldpin/signal/text_file.h"
#include "coldpin/units/error.h"

namespace coldpin::profile {
namespace {

constexpr int mutations_per_file = 800;

std::vector<std::filesystem::path> files_in(const std::string& folder) {
    std::vector<std::filesystem::path> files;
    for (const auto& entry :
         std::filesystem::directory_iterator(std::string(COLDPIN_SOURCE_DIR) + "/profiles/" + folder))
        if (entry.path().extension() == ".toml") files.push_back(entry.path());
    std::sort(files.begin(), files.end());
    return files;
}

// One of: cut short, a byte changed, a piece removed, a piece doubled, a value swapped for a strange one.
std::string mutated(std::string text, std::mt19937& random) {
    const auto below = [&](std::size_t end) {
        return std::uniform_int_distribution<std::size_t>(0, end - 1)(random);
    };
    static const std::vector<std::string> strange = {"nan",         "-inf",
                                                     "1e400",       "\"\"",
                                                     "[]",          "{}",
                                                     "[[1]]",       "-1",
                                                     "0",           "9223372036854775807",
                                                     "true",        "1979-05-27",
                                                     "\"\\u0000\"", "{ a = { b = [ { c = 1 } ] } }"};
    const std::size_t at = below(text.size()), length = 1 + below(40);
    switch (below(5)) {
        case 0:
            return text.substr(0, at);
        case 1:
            text[at] = static_cast<char>(below(256));
            return text;
        case 2:
            return text.erase(at, length);
        case 3:
            return text.insert(at, text.substr(below(text.size()), length));
        default: {
            const auto equals = text.find("= ", at);
            if (equals == std::string::npos) return text;
            const auto end = text.find('\n', equals);
            return text.replace(equals + 2, end - equals - 2, strange[below(strange.size())]);
        }
    }
}

// "file:LINE:COLUMN: ..." in one line without control characters.
void expect_place_and_reason(const std::string& message, const std::string& name) {
    ASSERT_EQ(message.substr(0, name.size() + 1), name + ":") << message;
    std::size_t at = name.size() + 1;
    for (int number = 0; number < 2; ++number) {
        const std::size_t begin = at;
        while (at < message.size() && std::isdigit(static_cast<unsigned char>(message[at])) != 0) ++at;
        ASSERT_GT(at, begin) << message;
        ASSERT_EQ(message[at], ':') << message;
        ++at;
    }
    for (char c : message) EXPECT_GE(static_cast<unsigned char>(c), 0x20) << message;
    EXPECT_NE(message.find("found "), std::string::npos) << message;
    EXPECT_NE(message.find("expected "), std::string::npos) << message;
}

template <typename Read>
void mutate(const std::string& folder, Read&& read) {
    int refused = 0, files = 0;
    for (const auto& file : files_in(folder)) {
        ++files;
        const std::string text = signal::read_text_file(file);
        for (unsigned seed = 0; seed < mutations_per_file; ++seed) {
            std::mt19937 random(seed);
            std::string damaged = mutated(text, random);
            if (seed % 3 == 0) damaged = mutated(damaged + "\n", random);
            SCOPED_TRACE(file.filename().string() + ", seed " + std::to_string(seed));
            try {
                read(damaged);
            } catch (const UsageError& error) {
                ++refused;
                expect_place_and_reason(error.what(), "damaged.toml");
            } catch (const std::exception& error) {
                ADD_FAILURE() << "not a UsageError: " << error.what();
            }
        }
    }
    EXPECT_GT(files, 4);
    EXPECT_GT(refused, files * mutations_per_file / 4);  // or the mutations would test nothing
}

TEST(MutationsTest, ADamagedDeviceProfileIsReadOrRefusedWithPlaceAndReason) {
    mutate("devices", [](const std::string& text) { device_profile_from_text(text, "damaged.toml"); });
}

TEST(MutationsTest, ADamagedRigFileIsReadOrRefusedWithPlaceAndReason) {
    mutate("rigs", [](const std::string& text) { rig_from_text(text, "damaged.toml"); });
}

TEST(MutationsTest, DeepNestingIsRefusedAndDoesNotOverflowTheStack) {
    for (const std::string& opening : {std::string("["), std::string("{a=")}) {
        std::string text = "schema = ";
        for (int i = 0; i < 100000; ++i) text += opening;
        EXPECT_THROW(device_profile_from_text(text, "deep.toml"), UsageError);
    }
    std::string keys = "a";
    for (int i = 0; i < 2000; ++i) keys += ".a";
    EXPECT_THROW(device_profile_from_text(keys + " = 1", "deep.toml"), UsageError);
}

}  // namespace
}  // namespace coldpin::profile
