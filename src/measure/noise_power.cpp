#include "noise_power.h"

#include <algorithm>
#include <cmath>

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

spectrum::BandPower weighted_power(const spectrum::AveragedSpectrum& spectrum, const Band& band,
                                   spectrum::Weighting weighting) {
    auto power = spectrum::band_power(spectrum, band.low_hz, band.high_hz,
                                      [&](double hz) { return spectrum::weighting_gain(weighting, hz); });
    // Segments at the ends are covered by fewer windows than those in the middle, and the averaging of bins
    // that were estimated themselves adds its share: together a loss of effective length that is at most one
    // segment.
    const double segment_s = 1.0 / spectrum.bin_hz;
    power.variance *=
        spectrum.duration_s / std::max(spectrum.duration_s - 0.7 * segment_s, 0.3 * spectrum.duration_s);
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
    double line = 0.0;
    for (std::size_t k = at > first + lobe ? at - lobe : first; k <= std::min(last, at + lobe); ++k)
        line += spectrum.density[k];
    if (line > 0.5 * total)
        cautions.push_back(
            fmt::format("more than half of the power is one line near {:.1f} Hz: hum or a tone, not noise; "
                        "it is included in the levels",
                        static_cast<double>(at) * spectrum.bin_hz));
}

}  // namespace coldpin::measure
