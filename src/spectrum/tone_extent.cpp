#include "coldpin/spectrum/tone_extent.h"

#include <algorithm>
#include <cmath>
#include <complex>
#include <numbers>
#include <vector>

#include <fmt/core.h>

#include "coldpin/spectrum/phasor_sum.h"
#include "coldpin/spectrum/window.h"
#include "coldpin/units/error.h"

namespace coldpin::spectrum {

namespace {

constexpr std::size_t most_blocks = 1200;  // the search is quadratic in them
constexpr std::size_t fewest_blocks = 5;   // a sweep passing the frequency fills one or two, however loud

std::vector<std::complex<double>> block_phasors(std::span<const double> samples, double step,
                                                std::size_t block) {
    const std::vector<double> window = window_samples(Window::hann, block);
    std::vector<double> shaped(block);
    std::vector<std::complex<double>> phasors;
    for (std::size_t begin = 0; begin + block <= samples.size(); begin += block) {
        for (std::size_t n = 0; n < block; ++n) shaped[n] = samples[begin + n] * window[n];
        phasors.push_back(phasor_sum(shaped, step) * std::polar(1.0, -reduced_angle(step, begin)));
    }
    return phasors;
}

// Mean |z|^2 of the noise alone: from differences of neighbours, in which a steady tone cancels, by their
// median, which the tone's two ends do not move. |difference|^2 is exponential with mean 2 s^2.
double noise_power(const std::vector<std::complex<double>>& z) {
    std::vector<double> differences;
    for (std::size_t k = 1; k < z.size(); ++k) differences.push_back(std::norm(z[k] - z[k - 1]));
    if (differences.empty()) return 0.0;
    const auto middle = differences.begin() + static_cast<std::ptrdiff_t>(differences.size() / 2);
    std::nth_element(differences.begin(), middle, differences.end());
    return *middle / (2.0 * std::numbers::ln2);
}

double amplitude_ceiling(const std::vector<std::complex<double>>& z) {
    std::vector<double> sizes;
    sizes.reserve(z.size());
    for (const auto& one : z) sizes.push_back(std::abs(one));
    std::sort(sizes.begin(), sizes.end());
    const double median = sizes[sizes.size() / 2], upper_tenth = sizes[sizes.size() * 9 / 10];
    return std::max(4.0 * median, upper_tenth);
}

}  // namespace

Extent find_tone(std::span<const double> samples, double rate_hz, double frequency_hz, double guard_s) {
    if (!(frequency_hz > 0.0) || !(frequency_hz < rate_hz / 2.0))
        throw UsageError(
            fmt::format("{:g} Hz lies outside what a sample rate of {:g} Hz carries", frequency_hz, rate_hz));
    const double period = rate_hz / frequency_hz;
    if (static_cast<double>(samples.size()) < 8.0 * period)
        throw UsageError(fmt::format("too short: less than eight periods of {:g} Hz", frequency_hz));
    const double shortest =
        std::max({4.0 * period, 0.01 * rate_hz,
                  static_cast<double>(samples.size()) / static_cast<double>(most_blocks)});
    const std::size_t block = std::min(static_cast<std::size_t>(std::ceil(shortest)), samples.size() / 2);
    const auto z = block_phasors(samples, 2.0 * std::numbers::pi * frequency_hz / rate_hz, block);

    // A sweep or a click that passes the frequency may be far louder than the tone, for a few blocks: what is
    // louder than a tenth of all blocks counts no more than that.
    const double ceiling = amplitude_ceiling(z);
    std::vector<std::complex<double>> limited = z;
    for (auto& one : limited)
        if (std::abs(one) > ceiling) one *= ceiling / std::abs(one);
    std::vector<std::complex<double>> sums(z.size() + 1);
    for (std::size_t k = 0; k < z.size(); ++k) sums[k + 1] = sums[k] + limited[k];
    double best = -1.0;
    std::size_t first = 0, last = 0;
    for (std::size_t a = 0; a < z.size(); ++a) {
        for (std::size_t b = a + std::min(fewest_blocks, z.size()); b <= z.size(); ++b) {
            const double score = std::norm(sums[b] - sums[a]) / static_cast<double>(b - a);
            if (score > best) {
                best = score;
                first = a;
                last = b;
            }
        }
    }
    const double noise = std::max(noise_power(z), 1e-300);
    Extent extent;
    extent.confidence = best / noise;
    // Each stretch's statistic exceeds t with probability exp(-t) under noise; there are fewer than K^2 of
    // them.
    const double threshold = 2.0 * std::log(static_cast<double>(z.size()) + 1.0) + 7.0;
    extent.found = best > 0.0 && extent.confidence > threshold;
    extent.begin = first * block;
    extent.end = last == z.size() ? samples.size() : last * block;
    // A block at either end may hold the tone's beginning or only part of it.
    const auto guard = static_cast<std::size_t>(guard_s * rate_hz);
    const std::size_t inset = block + guard;
    if (extent.end - extent.begin > 4 * inset) {
        extent.begin += inset;
        extent.end -= inset;
    } else {
        const std::size_t quarter = (extent.end - extent.begin) / 4;
        extent.begin += quarter;
        extent.end -= quarter;
    }
    return extent;
}

}  // namespace coldpin::spectrum
