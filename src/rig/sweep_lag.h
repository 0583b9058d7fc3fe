// Where in a recording a known wideband stimulus lies.
#pragma once

#include <span>
#include <vector>

namespace coldpin::rig {

// Whole frames by which the recording lags the stimulus, and how clearly that stands out of everything else
// (the peak over the root mean square; 12 and more is certain).
struct Lag {
    long long frames = 0;
    double clarity = 0.0;
};
Lag lag_of(std::span<const double> channel, const std::vector<double>& sent);

}  // namespace coldpin::rig
