#include "mains_lines.h"

#include <algorithm>
#include <cmath>

#include "coldpin/spectrum/averaged_spectrum.h"
#include "coldpin/spectrum/statistics.h"

namespace coldpin::spectrum {

namespace {

constexpr double longest_segment_s = 4.0;  // drift smears the lines of a longer one
constexpr double false_alarm = 1e-6;       // per bin; a few thousand bins are looked at
constexpr double assumed_drift_hz = 0.05;  // within a recording, of the fundamental
constexpr double score_cap = 9.0;          // ln of 39 dB: beyond, a line is not more of a line

// Mean noise power a bin, by the median of the bins around it: lines are too few to move a median.
std::vector<double> noise_floor(const std::vector<double>& density, std::size_t reach,
                                double degrees_of_freedom) {
    std::vector<double> floor(density.size()), around;
    const double shrink = std::pow(1.0 - 2.0 / (9.0 * degrees_of_freedom), 3);
    const std::size_t step = std::max<std::size_t>(1, reach / 4);
    for (std::size_t k = 0; k < density.size(); k += step) {
        const std::size_t begin = k > reach ? k - reach : 0, end = std::min(density.size(), k + reach + 1);
        around.assign(density.begin() + static_cast<std::ptrdiff_t>(begin),
                      density.begin() + static_cast<std::ptrdiff_t>(end));
        const auto middle = around.begin() + static_cast<std::ptrdiff_t>(around.size() / 2);
        std::nth_element(around.begin(), middle, around.end());
        for (std::size_t j = k; j < std::min(density.size(), k + step); ++j) floor[j] = *middle / shrink;
    }
    return floor;
}

// Peak of a parabola through the logarithms of three bins.
double refined_bin(const std::vector<double>& density, std::size_t k) {
    const double a = std::log(density[k - 1]), b = std::log(density[k]), c = std::log(density[k + 1]);
    const double bend = a - 2.0 * b + c;
    const double shift = bend < 0.0 ? 0.5 * (a - c) / bend : 0.0;
    return static_cast<double>(k) + std::clamp(shift, -0.5, 0.5);
}

struct Candidate {
    double frequency_hz = 0.0;
    double score = -1.0;
    std::vector<int> harmonics;
};

bool is_nominal(double frequency_hz) {
    return std::abs(frequency_hz - 50.0) < 1.0 || std::abs(frequency_hz - 60.0) < 1.2;
}

Candidate judge(double frequency_hz, const LineList& list) {
    Candidate candidate;
    candidate.frequency_hz = frequency_hz;
    double score = 0.0, weights = 0.0, weighted = 0.0;
    for (const Line& line : list.lines) {
        const double ratio = line.frequency_hz / frequency_hz;
        const double number = std::round(ratio);
        if (number < 1.0) continue;
        const double allowed_hz = 0.4 * list.resolution_hz + 0.5 * assumed_drift_hz * number;
        if (std::abs(line.frequency_hz - number * frequency_hz) > std::min(allowed_hz, 0.12 * frequency_hz))
            continue;
        candidate.harmonics.push_back(static_cast<int>(number));
        // A chance meeting is the likelier the higher the number: the window of tolerance grows with it.
        const double rarity = 1.0 / (1.0 + number / 12.0);
        score += std::min(std::log(line.snr), score_cap) * rarity;
        const double weight = number * std::min(std::log(line.snr), score_cap) * rarity;
        weights += weight * number;
        weighted += weight * line.frequency_hz;
    }
    std::sort(candidate.harmonics.begin(), candidate.harmonics.end());
    candidate.harmonics.erase(std::unique(candidate.harmonics.begin(), candidate.harmonics.end()),
                              candidate.harmonics.end());
    if (weights > 0.0) candidate.frequency_hz = weighted / weights;
    candidate.score = is_nominal(frequency_hz) ? 1.25 * score : score;
    return candidate;
}

// One line is no hum: test tones are single lines too. Alone, only the fundamental or its double (a
// rectifier's ripple) near a nominal frequency will do.
bool convincing(const Candidate& candidate) {
    if (candidate.harmonics.empty()) return false;
    if (candidate.harmonics.size() >= 2 && candidate.harmonics.front() <= 3) return true;
    return candidate.harmonics.front() <= 2 && is_nominal(candidate.frequency_hz);
}

}  // namespace

LineList find_lines(std::span<const double> samples, double rate_hz, double highest_hz) {
    WelchSettings settings;
    settings.segment =
        static_cast<std::size_t>(std::min(longest_segment_s * rate_hz, static_cast<double>(samples.size())));
    const AveragedSpectrum spectrum = averaged_spectrum(samples, rate_hz, settings);
    LineList list;
    list.bin_hz = spectrum.bin_hz;
    list.resolution_hz = main_lobe_half_width_bins(settings.window) * spectrum.bin_hz;
    // The bins of one segment are correlated by the window; its degrees of freedom hold for each.
    const double threshold =
        chi_square_quantile(1.0 - false_alarm, spectrum.degrees_of_freedom) / spectrum.degrees_of_freedom;
    const auto reach = static_cast<std::size_t>(std::max(24.0, 15.0 / spectrum.bin_hz));
    const auto floor = noise_floor(spectrum.density, reach, spectrum.degrees_of_freedom);
    const auto last =
        std::min(spectrum.density.size() - 2, static_cast<std::size_t>(highest_hz / spectrum.bin_hz));
    for (std::size_t k = 8; k <= last; ++k) {
        const auto& d = spectrum.density;
        if (!(d[k] > d[k - 1]) || !(d[k] >= d[k + 1]) || !(floor[k] > 0.0) || d[k] < threshold * floor[k])
            continue;
        // A window's side lobe is no line.
        const bool shadowed = std::any_of(list.lines.begin(), list.lines.end(), [&](const Line& line) {
            return std::abs(line.frequency_hz - static_cast<double>(k) * list.bin_hz) <
                   0.6 * list.resolution_hz;
        });
        if (shadowed && d[k] / floor[k] < list.lines.back().snr) continue;
        if (shadowed) list.lines.pop_back();
        list.lines.push_back({refined_bin(d, k) * spectrum.bin_hz, d[k] / floor[k]});
    }
    return list;
}

std::optional<Fundamental> find_fundamental(const LineList& list, const MainsSearch& search) {
    double low = search.low_hz, high = search.high_hz;
    if (search.near_hz) {
        low = 0.96 * *search.near_hz;
        high = 1.04 * *search.near_hz;
    }
    Candidate best;
    for (const Line& line : list.lines) {
        for (int number = std::max(1, static_cast<int>(std::ceil(line.frequency_hz / high)));
             line.frequency_hz / number >= low; ++number) {
            Candidate candidate = judge(line.frequency_hz / number, list);
            if (candidate.frequency_hz < low || candidate.frequency_hz > high || !convincing(candidate))
                continue;
            if (candidate.score > best.score) best = candidate;
        }
    }
    if (best.harmonics.empty()) return std::nullopt;
    Fundamental fundamental{best.frequency_hz, best.harmonics, {}};
    for (const Line& line : list.lines) {
        const double number = std::round(line.frequency_hz / best.frequency_hz);
        const double allowed_hz = 0.4 * list.resolution_hz + 0.5 * assumed_drift_hz * number;
        if (number < 1.0 || std::abs(line.frequency_hz - number * best.frequency_hz) >
                                std::min(allowed_hz, 0.12 * best.frequency_hz))
            fundamental.strangers.push_back(line);
    }
    return fundamental;
}

}  // namespace coldpin::spectrum
