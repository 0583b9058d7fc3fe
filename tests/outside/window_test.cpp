// Window figures against G. Heinzel, A. Ruediger, R. Schilling, "Spectrum and spectral density estimation by
// the discrete Fourier transform", 2002 (noise bandwidth, side lobe), and F. J. Harris, Proc. IEEE 66 (1978).
#include "coldpin/spectrum/window.h"

#include <cmath>
#include <complex>
#include <numbers>

#include <gtest/gtest.h>

#include "coldpin/units/level.h"

namespace coldpin::spectrum {
namespace {

// Transform of the window at a distance in bins, re its middle.
double response(const std::vector<double>& w, double bins) {
    std::complex<double> sum = 0.0;
    double total = 0.0;
    for (std::size_t j = 0; j < w.size(); ++j) {
        sum += w[j] * std::polar(1.0, -2.0 * std::numbers::pi * bins * static_cast<double>(j) /
                                          static_cast<double>(w.size()));
        total += w[j];
    }
    return std::abs(sum) / total;
}

struct Published {
    Window window;
    double noise_bandwidth_bins, scallop_db, side_lobe_db, main_lobe_bins;
};
const Published table[] = {{Window::rectangular, 1.0, 3.9224, 13.3, 1},
                           {Window::hann, 1.5, 1.4236, 31.5, 2},
                           {Window::blackman_harris, 2.0044, 0.8256, 92.0, 4},
                           {Window::flat_top_hft90d, 3.8832, 0.0039, 90.2, 5},
                           {Window::flat_top_hft144d, 4.5386, 0.0021, 144.1, 7}};

TEST(WindowOutsideTest, FiguresAreThePublishedOnes) {
    for (const auto& row : table) {
        const auto w = window_samples(row.window, 4096);
        EXPECT_NEAR(noise_bandwidth_bins(w), row.noise_bandwidth_bins, 6e-5);
        EXPECT_DOUBLE_EQ(main_lobe_half_width_bins(row.window), row.main_lobe_bins);
        double deviation = 0.0, lobe = 0.0;
        for (int i = 0; i <= 50; ++i)
            deviation = std::max(deviation, std::abs(units::db_from_ratio(response(w, 0.01 * i))));
        for (double bins = row.main_lobe_bins; bins < row.main_lobe_bins + 12.0; bins += 0.03)
            lobe = std::max(lobe, response(w, bins));
        EXPECT_NEAR(deviation, row.scallop_db, 0.0002);
        EXPECT_NEAR(-units::db_from_ratio(lobe), row.side_lobe_db, 0.1);
    }
}

}  // namespace
}  // namespace coldpin::spectrum
