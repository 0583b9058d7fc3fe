// Does the stimulus run through a recording without a jump?
#pragma once

#include "coldpin/rig/content_check.h"

namespace coldpin::rig {

// Tones and multitones: the phase of the clearest tones, block by block, must run in a straight line (its
// slope may differ from the nominal one: two clocks). Sweeps: unrolled by the known sweep, the delay must not
// step. Sets report.proven when the stimulus stood out clearly enough for a lost frame to show.
void check_continuity(std::span<const double> channel, double rate_hz, const signal::Stimulus& stimulus,
                      std::optional<double> expected_delay_frames, ContentReport& report);

}  // namespace coldpin::rig
