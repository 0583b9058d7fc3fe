// One tone followed through a stretch: its frequency, and how far parts of the stretch agree about it.
#pragma once

#include <complex>
#include <span>

namespace coldpin::measure {

// Least squares with Hann weights on cos, sin and 1: a line k bins beside the tone enters with the window's
// response, which falls as k^-3, where an unweighted fit would let it in as k^-1. Costs half as much noise
// power again (the window's noise bandwidth). The phasor (peak) refers to the first sample.
std::complex<double> hann_weighted_sine(std::span<const double> samples, double rate_hz, double frequency_hz);

inline constexpr double hann_noise_bandwidth = 1.5;  // bins

struct SteadyTone {
    double frequency_hz = 0.0;
    double frequency_std_hz = 0.0;   // from what the parts' phases leave of a straight line
    std::complex<double> phasor;     // peak, at frequency_hz, phase at the first sample
    double amplitude_scatter = 0.0;  // standard deviation of a part's amplitude
    double part_s = 0.0;             // a part: a quarter of the stretch
    double coherence = 0.0;          // of the parts, 1: one steady tone
};

// Seven overlapping quarters, each fitted by itself; the phases' slope corrects start_hz, which may be off by
// about half a cycle over the stretch. At least eight samples and two and a half periods a quarter.
SteadyTone follow_tone(std::span<const double> samples, double rate_hz, double start_hz);

}  // namespace coldpin::measure
