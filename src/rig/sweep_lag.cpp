#include "sweep_lag.h"

#include <algorithm>
#include <cmath>
#include <complex>

#include "coldpin/spectrum/fft.h"

namespace coldpin::rig {

using Complex = std::complex<double>;

Lag lag_of(std::span<const double> channel, const std::vector<double>& sent) {
    const std::size_t size = spectrum::fast_fft_size(channel.size() + sent.size());
    auto bins = spectrum::forward_fft(channel, size);
    const auto other = spectrum::forward_fft(sent, size);
    double strongest = 0.0;
    for (const Complex& x : other) strongest = std::max(strongest, std::norm(x));
    // Whitened, so that the peak is sharp whatever the sweep's slope.
    for (std::size_t k = 0; k < bins.size(); ++k)
        bins[k] *= std::conj(other[k]) / (std::norm(other[k]) + 1e-6 * strongest);
    const auto lags = spectrum::inverse_fft(bins, size);
    const auto peak = std::max_element(lags.begin(), lags.end(),
                                       [](double a, double b) { return std::abs(a) < std::abs(b); });
    double sum = 0.0;
    for (double x : lags) sum += x * x;
    const auto at = static_cast<long long>(peak - lags.begin());
    return {at >= static_cast<long long>(channel.size()) ? at - static_cast<long long>(size) : at,
            std::abs(*peak) / std::sqrt(sum / static_cast<double>(size))};
}

}  // namespace coldpin::rig
