#pragma once

#include <cstddef>
#include <string_view>

namespace coldpin::profile {

// Levenshtein distance in bytes; letters that differ in case only count as equal.
std::size_t edit_distance(std::string_view a, std::string_view b);

}  // namespace coldpin::profile
