#include "coldpin/units/preferred_values.h"

#include <array>
#include <cmath>

#include <fmt/core.h>

#include "coldpin/units/error.h"

namespace coldpin::units {

namespace {

// E24 is older than the rule of rounded powers and departs from it between 2.7 and 4.7 and at 8.2.
constexpr std::array<double, 24> e24 = {1.0, 1.1, 1.2, 1.3, 1.5, 1.6, 1.8, 2.0, 2.2, 2.4, 2.7, 3.0,
                                        3.3, 3.6, 3.9, 4.3, 4.7, 5.1, 5.6, 6.2, 6.8, 7.5, 8.2, 9.1};

const std::array<double, 96>& e96() noexcept {
    static const std::array<double, 96> values = [] {
        std::array<double, 96> made{};
        for (std::size_t k = 0; k < made.size(); ++k)
            made[k] = std::round(100.0 * std::pow(10.0, static_cast<double>(k) / 96.0)) / 100.0;
        return made;
    }();
    return values;
}

}  // namespace

std::span<const double> preferred_decade(PreferredSeries series) noexcept {
    if (series == PreferredSeries::e24) return e24;
    return e96();
}

double preferred_value(PreferredSeries series, double wanted, int steps) {
    if (!(wanted > 0.0) || !std::isfinite(wanted))
        throw UsageError(fmt::format("a part of {:g} does not exist: it must be above zero", wanted));
    const auto decade = preferred_decade(series);
    const auto count = static_cast<int>(decade.size());
    const auto value_at = [&](int index) {
        const int power = index >= 0 ? index / count : -((count - 1 - index) / count);
        return decade[static_cast<std::size_t>(index - power * count)] * std::pow(10.0, power);
    };
    // The rule of powers lands within one step of the nearest.
    const int about = static_cast<int>(std::lround(std::log10(wanted) * count));
    int nearest = about;
    for (int index = about - 2; index <= about + 2; ++index)
        if (std::abs(std::log(value_at(index) / wanted)) < std::abs(std::log(value_at(nearest) / wanted)))
            nearest = index;
    return value_at(nearest + steps);
}

}  // namespace coldpin::units
