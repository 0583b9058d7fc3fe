// Hum: mains frequency, its harmonics, and their power against the noise.
#pragma once

#include <optional>
#include <span>

#include "coldpin/measure/figure.h"
#include "coldpin/measure/scale.h"

namespace coldpin::measure {

struct HumQuestion {
    std::span<const double> recording;
    double rate_hz = 0.0;
    LevelScale scale;
    Band band;
    std::optional<double> mains_hz;  // where to look; found by itself otherwise
    std::optional<KnownLevel> gain_db;
    std::span<const double> interface_beside =
        {};  // as in NoiseQuestion: hum heard there too is the interface's
};

// Figures: mains_frequency (Hz, mean over the recording), hum_output (RMS sum of all mains harmonics in the
// band), hum_harmonic with conditions.harmonic for each one that stands out, hum_to_noise (dB: power of the
// harmonics over the unweighted noise power in the band without them); with a gain hum_input_referred.
// No hum found in the band: hum_output and hum_to_noise as at_most, a caution (mains_frequency only if hum
// stands out elsewhere). Throws CannotMeasure for silence.
Findings hum(const HumQuestion& question);

}  // namespace coldpin::measure
