// Where a figure lies in its limits, drawn small.
#pragma once

#include <string>

#include "coldpin/check/verdict.h"

namespace coldpin::report {

// A bar for the allowed room, edges for the limits, a mark whose shape tells the verdict, a line as long as
// the uncertainty. Empty for masks, polarity and figures that are missing.
std::string band_picture_svg(const check::Judgement& judgement);
// The same in a terminal's characters, for two-sided limits.
std::string band_picture_text(const check::Judgement& judgement);

}  // namespace coldpin::report
