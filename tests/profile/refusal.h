// What a reader says when it refuses a text, and texts with one place changed.
#pragma once

#include <algorithm>
#include <string>

#include <gtest/gtest.h>

#include "coldpin/units/error.h"

namespace coldpin::tests {

// The message of the UsageError that `read` throws; "accepted" when it throws none.
template <typename Read>
std::string refusal(Read&& read) {
    try {
        read();
    } catch (const UsageError& error) {
        return error.what();
    }
    return "accepted";
}

// `text` with the only occurrence of `from` replaced.
inline std::string with(std::string text, const std::string& from, const std::string& to) {
    const auto at = text.find(from);
    if (at == std::string::npos || text.find(from, at + 1) != std::string::npos) {
        ADD_FAILURE() << "'" << from << "' does not stand exactly once in the text";
        return text;
    }
    return text.replace(at, from.size(), to);
}

// The number of the line in which `what` first stands.
inline long line_of(const std::string& text, const std::string& what) {
    const auto at = text.find(what);
    EXPECT_NE(at, std::string::npos) << what;
    return 1 + std::count(text.begin(), text.begin() + static_cast<long>(std::min(at, text.size())), '\n');
}

}  // namespace coldpin::tests
