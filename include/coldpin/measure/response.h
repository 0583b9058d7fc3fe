// Frequency response: magnitude re a reference frequency, phase, group delay, corners, harmonics.
#pragma once

#include <optional>
#include <span>

#include "coldpin/measure/figure.h"
#include "coldpin/measure/scale.h"
#include "coldpin/signal/stimulus.h"

namespace coldpin::measure {

struct ResponseQuestion {
    std::span<const double> recording;
    double rate_hz = 0.0;
    std::optional<signal::Stimulus> stimulus;       // description, when known
    std::span<const double> stimulus_samples = {};  // what was played, when there is no description
    std::span<const double> reference = {};         // what was sent, recorded beside; wins over the stimulus
    Band band;
    double reference_frequency_hz = 997.0;
};

// Figures: lower_corner, upper_corner (Hz, half power re the reference frequency; a bound when outside what
// was measured), response_deviation (dB: largest deviation from the reference frequency within the band;
// conditions.frequency_hz says where). Curves: magnitude (dB re reference frequency), phase (degrees,
// unwrapped, pure delay removed), group_delay (s, pure delay removed), for sweeps harmonic_2, harmonic_3 ...
// (dB re the linear response at the exciting frequency). Sweep, multitone or any broadband samples.
// Throws as transfer(), and CannotMeasure for a clipped recording.
Findings response(const ResponseQuestion& question);

}  // namespace coldpin::measure
