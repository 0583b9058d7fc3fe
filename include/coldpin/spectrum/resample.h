// Samples at another rate, by a windowed sinc (Kaiser) read at any ratio.
#pragma once

#include <span>
#include <vector>

namespace coldpin::spectrum {

struct ResampleQuality {
    int half_width = 48;        // zero crossings of the sinc each side
    double kaiser_beta = 12.0;  // about 120 dB of stop-band
    double pass_edge = 0.95;    // the sinc's cutoff, of half the lower rate
};

// The samples as they would be at `to_hz`; frame 0 is at the same moment, the length is as many frames as
// fit. Outside the samples silence is taken. Throws UsageError for rates that are not positive, or a ratio
// beyond 16 either way.
std::vector<double> resampled(std::span<const double> samples, double from_hz, double to_hz,
                              const ResampleQuality& quality = {});

}  // namespace coldpin::spectrum
