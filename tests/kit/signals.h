// Signals with known truth for tests: seeded noise, hum, and a device made in the frequency domain, so that
// corners and fractional delays are exactly those of the formulas.
#pragma once

#include <algorithm>
#include <cmath>
#include <complex>
#include <numbers>
#include <random>
#include <vector>

#include "coldpin/spectrum/fft.h"
#include "coldpin/units/level.h"

namespace coldpin::tests {

inline constexpr double two_pi = 2.0 * std::numbers::pi;

inline std::vector<double> white_noise(std::size_t frames, double rms, unsigned seed) {
    std::mt19937_64 generator(seed);
    std::normal_distribution<double> normal;
    std::vector<double> samples(frames);
    for (double& x : samples) x = rms * normal(generator);
    return samples;
}

inline void add(std::vector<double>& to, const std::vector<double>& what) {
    for (std::size_t n = 0; n < std::min(to.size(), what.size()); ++n) to[n] += what[n];
}

inline std::vector<double> sine(std::size_t frames, double rate_hz, double frequency_hz, double peak,
                                double phase = 0.0) {
    std::vector<double> samples(frames);
    for (std::size_t n = 0; n < frames; ++n)
        samples[n] =
            peak * std::cos(two_pi * std::fmod(frequency_hz * static_cast<double>(n) / rate_hz, 1.0) + phase);
    return samples;
}

// Hum whose frequency runs linearly from mean - drift/2 to mean + drift/2; peaks[h - 1] for harmonic h.
inline std::vector<double> hum(std::size_t frames, double rate_hz, double mean_hz, double drift_hz,
                               const std::vector<double>& peaks) {
    std::vector<double> samples(frames, 0.0);
    const double length_s = static_cast<double>(frames) / rate_hz;
    for (std::size_t n = 0; n < frames; ++n) {
        const double t = static_cast<double>(n) / rate_hz;
        const double turns = (mean_hz - 0.5 * drift_hz) * t + 0.5 * drift_hz * t * t / length_s;
        for (std::size_t h = 0; h < peaks.size(); ++h) {
            const auto number = static_cast<double>(h + 1);
            samples[n] += peaks[h] * std::cos(two_pi * std::fmod(number * turns, 1.0) + number * number);
        }
    }
    return samples;
}

struct Device {
    double gain = 1.0;
    double high_pass_hz = 0.0;  // 0: none
    double low_pass_hz = 0.0;   // 0: none
    int order = 1;              // so many first-order sections of each
    double delay_frames = 0.0;
    double second = 0.0, third = 0.0;  // y = x + second x^2 + third x^3, before the filters

    std::complex<double> response(double frequency_hz) const {  // without the delay
        const std::complex<double> jf(0.0, frequency_hz);
        std::complex<double> h = gain;
        for (int i = 0; i < order; ++i) {
            if (high_pass_hz > 0.0) h *= jf / (jf + high_pass_hz);
            if (low_pass_hz > 0.0) h *= 1.0 / (1.0 + jf / low_pass_hz);
        }
        return h;
    }
};

// What `device` makes of `sent`, recorded for `frames`.
inline std::vector<double> through(std::vector<double> sent, const Device& device, double rate_hz,
                                   std::size_t frames) {
    for (double& x : sent) x = x + device.second * x * x + device.third * x * x * x;
    const std::size_t size =
        spectrum::fast_fft_size(std::max(frames, sent.size()) + static_cast<std::size_t>(4.0 * rate_hz));
    auto bins = spectrum::forward_fft(sent, size);
    for (std::size_t k = 0; k < bins.size(); ++k) {
        const double f = static_cast<double>(k) * rate_hz / static_cast<double>(size);
        bins[k] *=
            device.response(f) * std::polar(1.0, -two_pi * std::fmod(f / rate_hz * device.delay_frames, 1.0));
    }
    auto out = spectrum::inverse_fft(bins, size);
    out.resize(frames);
    return out;
}

inline double rms(const std::vector<double>& samples) {
    double sum = 0.0;
    for (double x : samples) sum += x * x;
    return std::sqrt(sum / static_cast<double>(samples.size()));
}

}  // namespace coldpin::tests
