// Text for a TOML file.
#pragma once

#include <string>

namespace coldpin::profile {

// As a basic string, with its quotes.
std::string quoted(const std::string& text);

}  // namespace coldpin::profile
