// What stands between the program and a pretended interface's converters: resampler, limiter, filters, mixer,
// clocks.
#pragma once

#include <vector>

#include "coldpin/rig/setup.h"

namespace coldpin::rig {

// What the host does to the outputs before they are converted: swapped, summed, dead channels.
void spoil_outputs(std::vector<std::vector<float>>& play, const SimulatedFaults& faults);

// ... to one input after it was converted: clock, resampler, limiter, filter. Full scale = 1, clamped.
void spoil_input(std::vector<float>& samples, double rate_hz, const SimulatedFaults& faults);

// ... to all of them: swapped, summed, dead channels.
void spoil_inputs(std::vector<std::vector<float>>& recorded, const SimulatedFaults& faults);

}  // namespace coldpin::rig
