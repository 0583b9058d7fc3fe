#include "noise_power.h"

#include <algorithm>
#include <cmath>
#include <numbers>

#include <fmt/core.h>

namespace coldpin::measure {

spectrum::AveragedSpectrum noise_spectrum(std::span<const double> samples, double rate_hz) {
    // A power of two near a second; at least four of them side by side while the recording allows.
    std::size_t segment = 65536;
    while (static_cast<double>(segment) > 1.5 * rate_hz) segment /= 2;
    while (static_cast<double>(segment) < 0.75 * rate_hz) segment *= 2;
    while (segment > 4096 && segment * 3 > samples.size()) segment /= 2;
    spectrum::WelchSettings settings;
    settings.segment = segment;
    return spectrum::averaged_spectrum(samples, rate_hz, settings);
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
    power.variance = 0.0;
    for (std::size_t k = 0; k < floor.size(); ++k) {
        const double hz = static_cast<double>(k) * spectrum.bin_hz;
        const double inside = std::min(hz + 0.5 * spectrum.bin_hz, band.high_hz) -
                              std::max(hz - 0.5 * spectrum.bin_hz, band.low_hz);
        if (inside <= 0.0) continue;
        const double w = weight(hz), w4 = w * w * w * w;
        // What lies up to four times over the median is the noise's own scatter, not a line.
        const double line = spectrum.density[k] > 4.0 * floor[k] ? spectrum.density[k] - floor[k] : 0.0;
        const double noise = line > 0.0 ? floor[k] : std::max(spectrum.density[k], floor[k]);
        power.variance += w4 * noise * (noise + 2.0 * line) * inside;
    }
    // Segments at the ends are covered by fewer windows than those in the middle, and the averaging of bins
    // that were estimated themselves adds its share: together a loss of effective length that is at most one
    // segment.
    const double segment_s = 1.0 / spectrum.bin_hz;
    power.variance /= std::max(spectrum.duration_s - 0.7 * segment_s, 0.3 * spectrum.duration_s);
    return power;
}

void describe_lines(const spectrum::AveragedSpectrum& spectrum, const Band& band,
                    std::vector<std::string>& cautions) {
    const auto first = static_cast<std::size_t>(std::max(1.0, std::ceil(band.low_hz / spectrum.bin_hz)));
    const auto last =
        std::min(spectrum.density.size() - 1, static_cast<std::size_t>(band.high_hz / spectrum.bin_hz));
    if (first >= last) return;
    const auto begin = spectrum.density.begin() + static_cast<std::ptrdiff_t>(first),
               end = spectrum.density.begin() + static_cast<std::ptrdiff_t>(last) + 1;
    double total = 0.0;
    for (auto it = begin; it != end; ++it) total += *it;
    const auto peak = std::max_element(begin, end);
    const auto at = static_cast<std::size_t>(peak - spectrum.density.begin());
    const auto lobe = static_cast<std::size_t>(spectrum::main_lobe_half_width_bins(spectrum.window));
    double line = 0.0, moment = 0.0;
    for (std::size_t k = at > first + lobe ? at - lobe : first; k <= std::min(last, at + lobe); ++k) {
        line += spectrum.density[k];
        moment += spectrum.density[k] * static_cast<double>(k);
    }
    if (line > 0.5 * total)
        cautions.push_back(
            fmt::format("more than half of the power is one line near {:.1f} Hz: hum or a tone, not noise; "
                        "it is included in the levels",
                        moment / line * spectrum.bin_hz));
}

}  // namespace coldpin::measure
