// Preferred values of resistors and capacitors (IEC 60063).
#pragma once

#include <span>

namespace coldpin::units {

enum class PreferredSeries { e24, e96 };

// One decade, ascending from 1.0 up to below 10.
std::span<const double> preferred_decade(PreferredSeries series) noexcept;

// The value of the series nearest to `wanted` by ratio, in any decade; `steps` away from it when asked.
// Throws UsageError when `wanted` is not positive and finite.
double preferred_value(PreferredSeries series, double wanted, int steps = 0);

}  // namespace coldpin::units
