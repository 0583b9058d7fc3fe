#include "coldpin/spectrum/window.h"

#include <cmath>

#include <gtest/gtest.h>

namespace coldpin::spectrum {
namespace {

TEST(WindowTest, IsSymmetricAboutItsMiddleAndPeriodic) {
    for (Window window :
         {Window::hann, Window::blackman_harris, Window::flat_top_hft90d, Window::flat_top_hft144d}) {
        const auto w = window_samples(window, 100);
        for (std::size_t j = 1; j < 100; ++j) EXPECT_NEAR(w[j], w[100 - j], 1e-12);
        EXPECT_LT(std::abs(w[0]), std::abs(w[50]));
    }
}

TEST(WindowTest, TheRectangularOneChangesNothing) {
    for (double w : window_samples(Window::rectangular, 10)) EXPECT_EQ(w, 1.0);
    EXPECT_DOUBLE_EQ(noise_bandwidth_bins(window_samples(Window::rectangular, 64)), 1.0);
}

}  // namespace
}  // namespace coldpin::spectrum
