// Crosstalk: what a channel that is not driven hears of one that is.
#pragma once

#include <span>

#include "coldpin/measure/figure.h"
#include "coldpin/measure/scale.h"

namespace coldpin::measure {

struct CrosstalkQuestion {
    std::span<const double> driven;
    std::span<const double> quiet;
    double rate_hz = 0.0;
    double frequency_hz = 0.0;
    // Level difference of the two inputs' full scales (driven minus quiet), when they differ.
    KnownLevel full_scale_difference_db;
};

// Figure crosstalk (dB: the tone in the quiet channel over that in the driven one, at_most when it does not
// stand out of the noise there), with conditions.frequency_hz. Both channels of one recording. Throws as
// gain(); UsageError for channels of different lengths.
Findings crosstalk(const CrosstalkQuestion& question);

}  // namespace coldpin::measure
