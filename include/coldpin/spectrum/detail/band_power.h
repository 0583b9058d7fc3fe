// Body of band_power(); included by averaged_spectrum.h only.
#pragma once

#include <algorithm>

namespace coldpin::spectrum {

template <typename Weight>
BandPower band_power(const AveragedSpectrum& spectrum, double low_hz, double high_hz, Weight&& weight) {
    BandPower sum;
    const double bin = spectrum.bin_hz;
    for (std::size_t k = 0; k < spectrum.density.size(); ++k) {
        const double f = static_cast<double>(k) * bin;
        const double inside = std::min(f + 0.5 * bin, high_hz) - std::max(f - 0.5 * bin, low_hz);
        if (inside <= 0.0) continue;
        const double w = weight(f);
        const double weighted = spectrum.density[k] * w * w;
        sum.mean_square += weighted * inside;
        sum.variance += weighted * weighted * inside;
    }
    if (spectrum.duration_s > 0.0) sum.variance /= spectrum.duration_s;
    return sum;
}

}  // namespace coldpin::spectrum
