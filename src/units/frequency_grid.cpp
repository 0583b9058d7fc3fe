#include "coldpin/units/frequency_grid.h"

#include <algorithm>
#include <cmath>

#include "coldpin/units/error.h"

namespace coldpin::units {

std::vector<double> logarithmic_grid(double low_hz, double high_hz, int per_octave) {
    if (!(low_hz > 0.0) || !(high_hz > low_hz) || per_octave < 1)
        throw UsageError("a frequency grid needs 0 < low < high and at least one point per octave");
    const double octaves = std::log2(high_hz / low_hz);
    const int steps = std::max(1, static_cast<int>(std::lround(octaves * per_octave)));
    std::vector<double> grid;
    grid.reserve(static_cast<size_t>(steps) + 1);
    for (int i = 0; i <= steps; ++i) grid.push_back(low_hz * std::exp2(octaves * i / steps));
    grid.back() = high_hz;
    return grid;
}

}  // namespace coldpin::units
