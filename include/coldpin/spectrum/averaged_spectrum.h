// Averaged power spectra (Welch 1967) with their degrees of freedom.
#pragma once

#include <complex>
#include <cstddef>
#include <span>
#include <vector>

#include "coldpin/spectrum/window.h"

namespace coldpin::spectrum {

struct WelchSettings {
    std::size_t segment = 65536;  // frames; shortened to the samples when they are fewer
    double overlap = 0.75;        // of the segment, 0 ... 0.95
    Window window = Window::blackman_harris;
};

// One-sided power spectral density in (sample unit)^2 / Hz: the sum of density * bin_hz over all bins is the
// mean square of the samples (mean removed per segment).
struct AveragedSpectrum {
    double bin_hz = 0.0;
    std::vector<double> density;  // segment/2 + 1 values from 0 Hz
    std::size_t segments = 0;
    double degrees_of_freedom = 0.0;  // of each bin, overlap accounted for
    double noise_bandwidth_hz = 0.0;  // of one bin (ENBW)
    double duration_s = 0.0;          // of the samples that went in
    Window window = Window::blackman_harris;
};

// Throws UsageError for fewer than 16 samples or a rate that is not positive. A constant offset does not
// matter (the mean is removed).
AveragedSpectrum averaged_spectrum(std::span<const double> samples, double rate_hz,
                                   const WelchSettings& settings = {});

// Averaged cross spectral density of two channels, one-sided, same scaling: conj(X) Y. Same length required.
std::vector<std::complex<double>> averaged_cross_spectrum(std::span<const double> x,
                                                          std::span<const double> y, double rate_hz,
                                                          const WelchSettings& settings = {});

// Degrees of freedom of an averaged bin for any window, overlap and number of segments:
// 2 K / (1 + 2 sum (1 - m/K) rho(m)^2).
double welch_degrees_of_freedom(const std::vector<double>& window, std::size_t hop, std::size_t segments);

// Mean square within [low, high] Hz, each bin multiplied by weight(f)^2 (amplitude weight), the bins at the
// edges counted by the fraction that lies inside, and the variance of that estimate from the averaged
// density: (1/T) * integral of (S w^2)^2 df.
struct BandPower {
    double mean_square = 0.0;
    double variance = 0.0;
};
template <typename Weight>
BandPower band_power(const AveragedSpectrum& spectrum, double low_hz, double high_hz, Weight&& weight);

}  // namespace coldpin::spectrum

#include "coldpin/spectrum/detail/band_power.h"
