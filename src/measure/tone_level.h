// A tone in a recording, wherever it sounds, with hum beside it and clocks that may differ.
#pragma once

#include <complex>
#include <cstddef>
#include <span>
#include <string>
#include <vector>

namespace coldpin::measure {

struct ToneLevel {
    double frequency_hz = 0.0;    // as asked for, or as fitted when the clocks differ
    std::complex<double> phasor;  // peak; phase at frame `begin`
    double amplitude = 0.0;
    double amplitude_std = 0.0;    // from the noise beside the tone and from how far its parts agree
    double harmonics_ratio = 0.0;  // RMS sum of harmonics 2 to 5 over the tone
    std::size_t begin = 0;         // frames used
    std::size_t end = 0;
    double sounding_s = 0.0;  // how long the tone lasts, its ends included
};

// Throws CannotMeasure when no such tone stands out (naming the tone that is there instead), UsageError when
// the recording is too short for it. Adds cautions in words.
ToneLevel tone_level(std::span<const double> recording, double rate_hz, double frequency_hz,
                     std::vector<std::string>& cautions);

}  // namespace coldpin::measure
