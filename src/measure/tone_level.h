// A tone in a recording, wherever it sounds, with hum beside it and clocks that may differ.
#pragma once

#include <complex>
#include <cstddef>
#include <span>
#include <string>
#include <vector>

namespace coldpin::measure {

struct ToneLevel {
    double frequency_hz = 0.0;
    std::complex<double> phasor;  // peak; phase at frame `begin`
    double amplitude = 0.0;
    double amplitude_std = 0.0;
    std::size_t begin = 0;  // frames used
    std::size_t end = 0;
};

// Throws CannotMeasure when no such tone stands out (naming the tone that is there instead), UsageError when
// the recording is too short for it. Adds cautions in words.
ToneLevel tone_level(std::span<const double> recording, double rate_hz, double frequency_hz,
                     std::vector<std::string>& cautions);

}  // namespace coldpin::measure
