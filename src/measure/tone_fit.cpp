#include "tone_fit.h"

#include <algorithm>
#include <cmath>
#include <numbers>

#include "coldpin/spectrum/mains.h"
#include "coldpin/spectrum/sine_fit.h"

namespace coldpin::measure {

namespace {

constexpr double faintest_std = 1e-10;  // -200 dBFS

std::vector<double> without_tones(std::span<const double> stretch, double rate_hz,
                                  std::span<const double> tones_hz,
                                  const std::vector<std::complex<double>>& phasors) {
    std::vector<double> rest(stretch.begin(), stretch.end());
    for (std::size_t k = 0; k < tones_hz.size(); ++k) {
        const double step = 2.0 * std::numbers::pi * tones_hz[k] / rate_hz;
        const std::complex<double> turn = std::polar(1.0, step);
        std::complex<double> phasor = phasors[k];
        for (double& x : rest) {
            x -= phasor.real();
            phasor *= turn;
        }
    }
    return rest;
}

}  // namespace

ToneFit fit_tones(std::span<const double> stretch, double rate_hz, std::span<const double> tones_hz) {
    ToneFit fit;
    fit.phasors = spectrum::fit_sines(stretch, rate_hz, tones_hz).phasors;
    std::vector<double> rest = without_tones(stretch, rate_hz, tones_hz, fit.phasors);
    const double length_s = static_cast<double>(stretch.size()) / rate_hz;
    const auto mains = length_s >= 0.5 ? spectrum::fit_mains(rest, rate_hz) : spectrum::MainsFit{};
    if (mains.found) {
        fit.mains_hz = mains.frequency_hz;
        // Hum within the resolution of a tone went with the tone, so this takes nothing from one.
        std::vector<double> clean(stretch.begin(), stretch.end());
        for (std::size_t n = 0; n < clean.size(); ++n) clean[n] -= mains.hum[n];
        fit.phasors = spectrum::fit_sines(clean, rate_hz, tones_hz).phasors;
        rest = without_tones(clean, rate_hz, tones_hz, fit.phasors);
    }
    for (double tone : tones_hz) {
        const double density = spectrum::noise_density_near(rest, rate_hz, tone, std::max(15.0, 0.05 * tone));
        // No converter resolves less than this, however silent the samples.
        fit.std.push_back(std::max(std::sqrt(density / length_s), faintest_std));
    }
    return fit;
}

}  // namespace coldpin::measure
