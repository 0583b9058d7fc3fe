// Least-squares fits of sines (IEEE Std 1057: three- and four-parameter fits) and of many sines at once.
//
// Phases refer to the first sample of the span unless told otherwise: component = Re(phasor exp(i w n)),
// so phasor = amplitude (peak) * exp(i phase of a cosine).
#pragma once

#include <complex>
#include <span>
#include <vector>

namespace coldpin::spectrum {

struct SineFit {
    double frequency_hz = 0.0;
    std::complex<double> phasor;  // peak amplitude
    double offset = 0.0;
    double residual_mean_square = 0.0;  // of what the sine leaves
    double amplitude_std = 0.0;         // standard deviation of the amplitude: sqrt(2 s^2 / N), white noise
    double frequency_std_hz = 0.0;      // 0 when the frequency was given
};

// Known frequency: exact normal equations on cos, sin, 1. Throws UsageError for less than one period or
// fewer than 8 samples.
SineFit fit_sine(std::span<const double> samples, double rate_hz, double frequency_hz);

// Frequency refined by Gauss-Newton from a start value (within about half a bin, i.e. 0.5 rate/N, of the
// truth); throws CannotMeasure when it does not settle there.
SineFit fit_sine_and_frequency(std::span<const double> samples, double rate_hz, double start_hz);

// Several known frequencies and an offset fitted together (so that close ones do not disturb each other).
// Phasors in the order given. Throws UsageError when frequencies are closer than one over the duration.
struct MultiSineFit {
    std::vector<std::complex<double>> phasors;
    double offset = 0.0;
    double residual_mean_square = 0.0;
};
MultiSineFit fit_sines(std::span<const double> samples, double rate_hz,
                       std::span<const double> frequencies_hz);

// Noise mean square per Hz (one-sided density) around a tone, from what lies beside it after the tone was
// fitted: the honest base for an amplitude's uncertainty when the noise is not white. `half_width_hz` each
// side; hum lines and the tone's own neighbourhood are left out by taking a median-based mean.
double noise_density_near(std::span<const double> samples, double rate_hz, double frequency_hz,
                          double half_width_hz);

}  // namespace coldpin::spectrum
