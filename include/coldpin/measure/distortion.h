// Harmonic distortion of a tone, and what else comes with it.
#pragma once

#include <span>

#include "coldpin/measure/figure.h"
#include "coldpin/measure/scale.h"

namespace coldpin::measure {

struct DistortionQuestion {
    std::span<const double> recording;
    double rate_hz = 0.0;
    double frequency_hz = 0.0;
    LevelScale scale;
    Band band;
    int highest_harmonic = 10;  // as far as band and rate allow
};

// Figures: thd (%, RMS sum of harmonics 2 ... n over the fundamental; conditions.highest_harmonic), thd_n (%,
// AES17: everything in the band but the fundamental over everything, fundamental included), sinad (dB, the
// inverse), harmonic (dB re the fundamental; conditions.harmonic), output_level (of the fundamental).
// Harmonics are fitted together with the tone over all of its length, hum fitted beside them and kept out of
// thd; a harmonic or sum that does not stand out of the noise is a bound (at_most). The recording's
// converters add their own, which can hide or feign: a caution says so below -80 dB. Throws as gain().
Findings distortion(const DistortionQuestion& question);

}  // namespace coldpin::measure
