// A run as one HTML file that opens offline: no scripts from elsewhere, charts as inline SVG, light and dark,
// narrow and wide, printable.
#pragma once

#include <string>

#include "coldpin/check/run.h"

namespace coldpin::report {

std::string html(const check::Run& run);

}  // namespace coldpin::report
