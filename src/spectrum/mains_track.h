// Second half of the mains search: one phase track that all harmonics share.
#pragma once

#include <array>
#include <complex>
#include <cstddef>
#include <span>
#include <vector>

namespace coldpin::spectrum {

// Phase of the fundamental in rad at time t: 2 pi f t + polynomial in (t - middle)/length without constant.
struct PhaseTrack {
    double base_hz = 50.0;
    double length_s = 0.0;
    std::array<double, 4> bend = {0.0, 0.0, 0.0, 0.0};  // of u, u^2, u^3, u^4 with u in [-1/2, 1/2]
    double mean_std_hz = 0.0;

    double phase(double t_s) const noexcept;
    double mean_hz() const noexcept;  // phase advance over the whole length
    double frequency(double t_s) const noexcept;
};

// Fits the track to the harmonics named, starting from start_hz.
PhaseTrack fit_track(std::span<const double> samples, double rate_hz, double start_hz,
                     const std::vector<int>& harmonics);

// 2 / sum(w) * sum w x exp(-i h phase): mean phasor of a harmonic along the track, window-weighted.
std::complex<double> along_track(std::span<const double> samples, const std::vector<double>& window,
                                 double rate_hz, const PhaseTrack& track, int harmonic);

}  // namespace coldpin::spectrum
