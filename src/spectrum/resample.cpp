#include "coldpin/spectrum/resample.h"

#include <algorithm>
#include <cmath>
#include <numbers>

#include "coldpin/units/error.h"

namespace coldpin::spectrum {

namespace {

// The modified Bessel function of order zero by its power series.
double bessel_i0(double x) {
    double sum = 1.0, term = 1.0;
    for (int k = 1; k < 60; ++k) {
        term *= (0.5 * x / k) * (0.5 * x / k);
        sum += term;
    }
    return sum;
}

// Half of the symmetric kernel, `per_crossing` values per zero crossing of a sinc at half the rate.
constexpr int per_crossing = 2048;

std::vector<double> kernel(double cutoff, const ResampleQuality& quality) {
    std::vector<double> values(static_cast<std::size_t>(quality.half_width * per_crossing) + 2, 0.0);
    const double scale = bessel_i0(quality.kaiser_beta);
    for (std::size_t k = 0; k + 2 < values.size(); ++k) {
        const double t = static_cast<double>(k) / per_crossing;  // in samples of the source at cutoff 1
        const double along = t / quality.half_width;
        const double x = std::numbers::pi * cutoff * t;
        values[k] = cutoff * (k == 0 ? 1.0 : std::sin(x) / x) *
                    bessel_i0(quality.kaiser_beta * std::sqrt(std::max(0.0, 1.0 - along * along))) / scale;
    }
    return values;
}

}  // namespace

std::vector<double> resampled(std::span<const double> samples, double from_hz, double to_hz,
                              const ResampleQuality& quality) {
    const double ratio = to_hz / from_hz;
    if (!(from_hz > 0.0) || !(to_hz > 0.0) || !(ratio <= 16.0) || !(ratio >= 1.0 / 16.0))
        throw UsageError("resampling needs two positive rates no further apart than sixteen to one");
    // Below the source's rate the kernel widens, so that nothing folds down.
    const double lower = std::min(1.0, ratio);
    ResampleQuality wide = quality;
    wide.half_width = static_cast<int>(std::ceil(quality.half_width / lower));
    const std::vector<double> half = kernel(lower * quality.pass_edge, wide);
    const auto count = static_cast<std::size_t>(static_cast<double>(samples.size()) * ratio);
    std::vector<double> out(count, 0.0);
    for (std::size_t m = 0; m < count; ++m) {
        const double place = static_cast<double>(m) / ratio;
        const auto centre = static_cast<long long>(place);
        const long long first = std::max<long long>(0, centre - wide.half_width + 1),
                        last = std::min<long long>(static_cast<long long>(samples.size()) - 1,
                                                   centre + wide.half_width);
        double sum = 0.0;
        for (long long n = first; n <= last; ++n) {
            const double at = std::abs(place - static_cast<double>(n)) * per_crossing;
            const auto index = static_cast<std::size_t>(at);
            if (index + 1 >= half.size()) continue;
            const double part = at - static_cast<double>(index);
            sum +=
                samples[static_cast<std::size_t>(n)] * (half[index] + part * (half[index + 1] - half[index]));
        }
        out[m] = sum;
    }
    return out;
}

}  // namespace coldpin::spectrum
