#include "coldpin/spectrum/averaged_spectrum.h"

#include <algorithm>
#include <cmath>
#include <numeric>

#include "coldpin/spectrum/fft.h"
#include "coldpin/units/error.h"

namespace coldpin::spectrum {

namespace {

struct Layout {
    std::size_t segment = 0;
    std::size_t hop = 0;
    std::size_t count = 0;
};

Layout layout_for(std::size_t samples, double rate_hz, const WelchSettings& settings) {
    if (samples < 16) throw UsageError("a spectrum needs at least 16 samples");
    if (!(rate_hz > 0.0)) throw UsageError("a spectrum needs a positive sample rate");
    if (!(settings.overlap >= 0.0) || settings.overlap > 0.95)
        throw UsageError("segments may overlap by 0 to 0.95 of their length");
    Layout layout;
    layout.segment = std::clamp<std::size_t>(settings.segment, 16, samples);
    layout.hop =
        std::max<std::size_t>(1, static_cast<std::size_t>(std::lround(static_cast<double>(layout.segment) *
                                                                      (1.0 - settings.overlap))));
    layout.count = (samples - layout.segment) / layout.hop + 1;
    return layout;
}

void fill(std::span<double> in, std::span<const double> samples, const std::vector<double>& window) {
    const double mean =
        std::accumulate(samples.begin(), samples.end(), 0.0) / static_cast<double>(samples.size());
    for (std::size_t n = 0; n < samples.size(); ++n) in[n] = (samples[n] - mean) * window[n];
}

// One-sided: the bins at 0 Hz and at half the rate stand for themselves only.
double sides(std::size_t bin, std::size_t segment) {
    return bin == 0 || 2 * bin == segment ? 1.0 : 2.0;
}

double density_scale(const std::vector<double>& window, double rate_hz, std::size_t segments) {
    double squares = 0.0;
    for (double w : window) squares += w * w;
    return 1.0 / (rate_hz * squares * static_cast<double>(segments));
}

}  // namespace

double welch_degrees_of_freedom(const std::vector<double>& window, std::size_t hop, std::size_t segments) {
    const double squares = std::inner_product(window.begin(), window.end(), window.begin(), 0.0);
    const auto k = static_cast<double>(segments);
    double sum = 0.0;
    for (std::size_t m = 1; m < segments && m * hop < window.size(); ++m) {
        double overlap = 0.0;
        for (std::size_t j = 0; j + m * hop < window.size(); ++j) overlap += window[j] * window[j + m * hop];
        const double rho = overlap / squares;
        sum += (1.0 - static_cast<double>(m) / k) * rho * rho;
    }
    return 2.0 * k / (1.0 + 2.0 * sum);
}

AveragedSpectrum averaged_spectrum(std::span<const double> samples, double rate_hz,
                                   const WelchSettings& settings) {
    const Layout layout = layout_for(samples.size(), rate_hz, settings);
    const std::vector<double> window = window_samples(settings.window, layout.segment);
    FftWorkspace transform(layout.segment);
    AveragedSpectrum spectrum;
    spectrum.density.assign(layout.segment / 2 + 1, 0.0);
    for (std::size_t s = 0; s < layout.count; ++s) {
        fill(transform.in(), samples.subspan(s * layout.hop, layout.segment), window);
        const auto bins = transform.run();
        for (std::size_t k = 0; k < bins.size(); ++k) spectrum.density[k] += std::norm(bins[k]);
    }
    const double scale = density_scale(window, rate_hz, layout.count);
    for (std::size_t k = 0; k < spectrum.density.size(); ++k)
        spectrum.density[k] *= scale * sides(k, layout.segment);
    spectrum.bin_hz = rate_hz / static_cast<double>(layout.segment);
    spectrum.segments = layout.count;
    spectrum.degrees_of_freedom = welch_degrees_of_freedom(window, layout.hop, layout.count);
    spectrum.noise_bandwidth_hz = noise_bandwidth_bins(window) * spectrum.bin_hz;
    spectrum.duration_s = static_cast<double>(samples.size()) / rate_hz;
    spectrum.window = settings.window;
    return spectrum;
}

std::vector<std::complex<double>> averaged_cross_spectrum(std::span<const double> x,
                                                          std::span<const double> y, double rate_hz,
                                                          const WelchSettings& settings) {
    if (x.size() != y.size()) throw UsageError("a cross spectrum needs two channels of one length");
    const Layout layout = layout_for(x.size(), rate_hz, settings);
    const std::vector<double> window = window_samples(settings.window, layout.segment);
    FftWorkspace transform_x(layout.segment), transform_y(layout.segment);
    std::vector<std::complex<double>> cross(layout.segment / 2 + 1);
    for (std::size_t s = 0; s < layout.count; ++s) {
        fill(transform_x.in(), x.subspan(s * layout.hop, layout.segment), window);
        fill(transform_y.in(), y.subspan(s * layout.hop, layout.segment), window);
        const auto bins_x = transform_x.run();
        const auto bins_y = transform_y.run();
        for (std::size_t k = 0; k < cross.size(); ++k) cross[k] += std::conj(bins_x[k]) * bins_y[k];
    }
    const double scale = density_scale(window, rate_hz, layout.count);
    for (std::size_t k = 0; k < cross.size(); ++k) cross[k] *= scale * sides(k, layout.segment);
    return cross;
}

}  // namespace coldpin::spectrum
