#include "steadiness.h"

#include <algorithm>
#include <array>
#include <cmath>
#include <cstddef>

#include "coldpin/spectrum/averaged_spectrum.h"
#include "coldpin/spectrum/statistics.h"
#include "coldpin/units/level.h"

namespace coldpin::measure {

namespace {

constexpr std::size_t parts = 8;
constexpr double lowest_hz = 50.0;
constexpr double false_alarm = 0.001;

}  // namespace

Steadiness noise_steadiness(std::span<const double> samples, double rate_hz, const Band& band,
                            double relative_std_by_chance) {
    Steadiness result;
    spectrum::WelchSettings settings;
    settings.segment = rate_hz > 60000.0 ? 8192 : 4096;
    settings.overlap = 0.5;
    const std::size_t length = samples.size() / parts;
    const double low_hz = std::max(band.low_hz, lowest_hz);
    if (length < settings.segment || !(band.high_hz > 2.0 * low_hz)) return result;
    std::array<double, parts> powers{};
    double mean = 0.0;
    for (std::size_t p = 0; p < parts; ++p) {
        const auto spectrum =
            spectrum::averaged_spectrum(samples.subspan(p * length, length), rate_hz, settings);
        powers[p] =
            spectrum::band_power(spectrum, low_hz, band.high_hz, [](double) { return 1.0; }).mean_square;
        mean += powers[p] / parts;
    }
    const auto [quietest, loudest] = std::minmax_element(powers.begin(), powers.end());
    if (!(*quietest > 0.0)) return result;
    double squares = 0.0;
    for (double power : powers) squares += (power - mean) * (power - mean);
    const double variance = squares / (parts - 1) / (mean * mean) / parts;
    const double by_chance = relative_std_by_chance * relative_std_by_chance;
    const double limit = spectrum::chi_square_quantile(1.0 - false_alarm, parts - 1) / (parts - 1);
    // Segments in a part's middle count more than those at its ends, which costs a fifth of the part.
    result.steady = variance <= 1.2 * limit * by_chance;
    result.relative_std = std::sqrt(variance);
    result.spread_db = units::db_from_power_ratio(*loudest / *quietest);
    return result;
}

}  // namespace coldpin::measure
