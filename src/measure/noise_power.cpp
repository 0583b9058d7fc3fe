#include "noise_power.h"

#include <algorithm>
#include <cmath>
#include <numbers>

#include <fmt/core.h>

namespace coldpin::measure {

namespace {

constexpr double overlap = 0.75;  // of the segments

// What lies up to four times over the median is the noise's own scatter, not a line.
bool is_line(double density, double floor) {
    return density > 4.0 * floor;
}

// Segments overlap, and the recording's ends are covered by fewer windows than its middle: with the coverage
// E(t) (the sum of squared windows), the power scatters as that of a recording of (sum E)^2 / sum E^2.
double effective_duration_s(const spectrum::AveragedSpectrum& spectrum) {
    constexpr std::size_t points = 256;
    const auto hop = static_cast<std::size_t>(points * (1.0 - overlap));
    const auto window = spectrum::window_samples(spectrum.window, points);
    std::vector<double> coverage((spectrum.segments - 1) * hop + points, 0.0);
    for (std::size_t s = 0; s < spectrum.segments; ++s)
        for (std::size_t j = 0; j < points; ++j) coverage[s * hop + j] += window[j] * window[j];
    double sum = 0.0, squares = 0.0;
    for (double e : coverage) {
        sum += e;
        squares += e * e;
    }
    return sum * sum / squares / (static_cast<double>(points) * spectrum.bin_hz);
}

// Second moment of the window's power spectrum: sum (w')^2 / sum w^2 / (2 pi)^2, by Parseval.
double smear_variance_hz2(const spectrum::AveragedSpectrum& spectrum) {
    constexpr std::size_t points = 2048;
    const auto window = spectrum::window_samples(spectrum.window, points);
    double slopes = 0.0, squares = 0.0;
    for (std::size_t j = 0; j < points; ++j) {
        const double slope = 0.5 * (window[(j + 1) % points] - window[(j + points - 1) % points]) *
                             static_cast<double>(points);
        slopes += slope * slope;
        squares += window[j] * window[j];
    }
    return slopes / squares / (4.0 * std::numbers::pi * std::numbers::pi) * spectrum.bin_hz * spectrum.bin_hz;
}

// The variance of a band's power comes from the noise alone, and from the noise beating with each line: a
// line's own power does not scatter. Lines are what stands above a running median of the density.
std::vector<double> noise_under_lines(const spectrum::AveragedSpectrum& spectrum) {
    const auto& density = spectrum.density;
    const std::size_t reach =
        static_cast<std::size_t>(6.0 * spectrum::main_lobe_half_width_bins(spectrum.window));
    const double shrink = std::pow(1.0 - 2.0 / (9.0 * spectrum.degrees_of_freedom), 3);
    std::vector<double> floor(density.size()), around;
    const std::size_t stride = std::max<std::size_t>(1, reach / 3);
    for (std::size_t k = 0; k < density.size(); k += stride) {
        // Symmetric, so that a slope does not lift the median; narrower towards 0 Hz.
        const std::size_t half = std::min(
            {reach, std::max<std::size_t>(k, 2), density.size() - 1 - std::min(k, density.size() - 1) + 2});
        const auto first = static_cast<std::ptrdiff_t>(k > half ? k - half : 0);
        const auto last = static_cast<std::ptrdiff_t>(std::min(density.size(), k + half + 1));
        around.assign(density.begin() + first, density.begin() + last);
        const auto middle = around.begin() + static_cast<std::ptrdiff_t>(around.size() / 2);
        std::nth_element(around.begin(), middle, around.end());
        for (std::size_t j = k; j < std::min(density.size(), k + stride); ++j) floor[j] = *middle / shrink;
    }
    return floor;
}

}  // namespace

spectrum::AveragedSpectrum noise_spectrum(std::span<const double> samples, double rate_hz) {
    // A power of two near a second; at least four of them side by side while the recording allows.
    std::size_t segment = 65536;
    while (static_cast<double>(segment) > 1.5 * rate_hz) segment /= 2;
    while (static_cast<double>(segment) < 0.75 * rate_hz) segment *= 2;
    while (segment > 4096 && segment * 3 > samples.size()) segment /= 2;
    spectrum::WelchSettings settings;
    settings.segment = segment;
    settings.overlap = overlap;
    return spectrum::averaged_spectrum(samples, rate_hz, settings);
}

spectrum::BandPower weighted_power(const spectrum::AveragedSpectrum& spectrum, const Band& band,
                                   spectrum::Weighting weighting) {
    // A window smears each line over a few bins, and a steep weighting would then weigh it by the mean of its
    // slope. The weight that has the right mean after smearing is w^2 less half the smearing's variance times
    // its second derivative.
    const double variance_hz2 = smear_variance_hz2(spectrum), step = spectrum.bin_hz;
    const auto square = [&](double hz) { return std::pow(spectrum::weighting_gain(weighting, hz), 2); };
    const auto weight = [&](double hz) {
        if (weighting == spectrum::Weighting::none || hz < 2.0 * step)
            return spectrum::weighting_gain(weighting, hz);
        const double bend = (square(hz + step) - 2.0 * square(hz) + square(hz - step)) / (step * step);
        return std::sqrt(std::max(square(hz) - 0.5 * variance_hz2 * bend, 0.0));
    };
    auto power = spectrum::band_power(spectrum, band.low_hz, band.high_hz, weight);
    const std::vector<double> floor = noise_under_lines(spectrum);
    // The square of an estimated density is on average too large by its own relative variance.
    const double square_bias = 1.0 + 2.0 / spectrum.degrees_of_freedom;
    power.variance = 0.0;
    for (std::size_t k = 0; k < floor.size(); ++k) {
        const double hz = static_cast<double>(k) * spectrum.bin_hz;
        const double inside = std::min(hz + 0.5 * spectrum.bin_hz, band.high_hz) -
                              std::max(hz - 0.5 * spectrum.bin_hz, band.low_hz);
        if (inside <= 0.0) continue;
        const double w = spectrum::weighting_gain(weighting, hz), w4 = w * w * w * w, d = spectrum.density[k];
        const double squares =
            is_line(d, floor[k]) ? floor[k] * (floor[k] + 2.0 * (d - floor[k])) : d * d / square_bias;
        power.variance += w4 * squares * inside;
    }
    power.variance /= effective_duration_s(spectrum);
    return power;
}

void describe_lines(const spectrum::AveragedSpectrum& spectrum, const Band& band,
                    std::vector<std::string>& cautions) {
    const auto first = static_cast<std::size_t>(std::max(1.0, std::ceil(band.low_hz / spectrum.bin_hz)));
    const auto last =
        std::min(spectrum.density.size() - 1, static_cast<std::size_t>(band.high_hz / spectrum.bin_hz));
    if (first >= last) return;
    const std::vector<double> floor = noise_under_lines(spectrum);
    const auto& density = spectrum.density;
    double total = 0.0, lines = 0.0;
    std::size_t strongest = first;
    for (std::size_t k = first; k <= last; ++k) {
        total += density[k];
        if (is_line(density[k], floor[k])) lines += density[k] - floor[k];
        if (density[k] > density[strongest]) strongest = k;
    }
    if (!(lines > 0.5 * total)) return;
    const auto lobe = static_cast<std::size_t>(spectrum::main_lobe_half_width_bins(spectrum.window));
    double line = 0.0, moment = 0.0;
    for (std::size_t k = strongest > lobe ? strongest - lobe : 0; k <= std::min(last, strongest + lobe);
         ++k) {
        line += density[k];
        moment += density[k] * static_cast<double>(k);
    }
    cautions.push_back(
        fmt::format("more than half of the power is in single lines, the strongest near {:.1f} Hz: hum or "
                    "a tone, not noise; it is included in the levels",
                    moment / line * spectrum.bin_hz));
}

}  // namespace coldpin::measure
