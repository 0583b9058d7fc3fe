// Common-mode rejection at single frequencies: a tone or several at once.
#pragma once

#include "coldpin/measure/cmrr.h"

namespace coldpin::measure {

// Adds a figure for each of question.frequencies_hz (all tones of the stimulus when empty) and, for several,
// the curve. Throws as common_mode_rejection().
void measure_tones(Findings& findings, const CmrrQuestion& question);

}  // namespace coldpin::measure
