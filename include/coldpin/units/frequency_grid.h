// Lists of frequencies for stimuli and curves. Pure; frequencies in Hz, ascending.
#pragma once

#include <vector>

namespace coldpin::units {

// Points per octave from low to high, both ends included as exact values; the spacing is rounded so that it
// divides the span evenly. Requires 0 < low < high and per_octave >= 1 (UsageError otherwise).
std::vector<double> logarithmic_grid(double low_hz, double high_hz, int per_octave);

}  // namespace coldpin::units
