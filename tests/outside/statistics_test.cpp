// Sine fits against the Cramer-Rao bound (the formulas of IEEE Std 1057's literature: var A >= 2 s^2/N,
// var w >= 24 s^2/(A^2 N (N^2 - 1))); averaging against the closed form for Hann at 50 % overlap,
// nu = 36 K^2/(19 K - 1) (Welch 1967); quantiles against printed tables.
#include "coldpin/spectrum/statistics.h"

#include <gtest/gtest.h>

#include "coldpin/spectrum/averaged_spectrum.h"
#include "coldpin/spectrum/sine_fit.h"

#include "kit/signals.h"

namespace coldpin::spectrum {
namespace {

TEST(StatisticsOutsideTest, SineFitsScatterAsTheCramerRaoBoundSays) {
    constexpr int seeds = 400;
    constexpr std::size_t count = 2000;
    const double amplitude = 0.5, noise = 0.01, rate = 48000.0;
    std::vector<double> amplitudes, frequencies;
    for (unsigned seed = 0; seed < seeds; ++seed) {
        auto x = tests::sine(count, rate, 997.0, amplitude, 0.01 * seed);
        tests::add(x, tests::white_noise(count, noise, seed));
        amplitudes.push_back(std::abs(fit_sine(x, rate, 997.0).phasor));
        frequencies.push_back(fit_sine_and_frequency(x, rate, 997.5).frequency_hz);
    }
    const auto variance = [](const std::vector<double>& v) {
        double mean = 0.0, sum = 0.0;
        for (double x : v) mean += x / static_cast<double>(v.size());
        for (double x : v) sum += (x - mean) * (x - mean);
        return sum / (static_cast<double>(v.size()) - 1.0);
    };
    const double n = static_cast<double>(count), power = noise * noise;
    const double bound_amplitude = 2.0 * power / n;
    const double bound_hz =
        24.0 * power / (amplitude * amplitude * n * (n * n - 1.0)) * std::pow(rate / tests::two_pi, 2);
    // A variance from 400 values lies within these quantiles 99.9 % of the time.
    const double low = chi_square_quantile(0.0005, seeds - 1) / (seeds - 1),
                 high = chi_square_quantile(0.9995, seeds - 1) / (seeds - 1);
    EXPECT_GT(variance(amplitudes) / bound_amplitude, low);
    EXPECT_LT(variance(amplitudes) / bound_amplitude, high);
    EXPECT_GT(variance(frequencies) / bound_hz, low);
    EXPECT_LT(variance(frequencies) / bound_hz, high);
}

TEST(StatisticsOutsideTest, HannAtHalfOverlapHasTheClosedForm) {
    const auto window = window_samples(Window::hann, 4096);
    for (std::size_t segments : {2U, 10U, 100U}) {
        const auto k = static_cast<double>(segments);
        EXPECT_NEAR(welch_degrees_of_freedom(window, 2048, segments), 36.0 * k * k / (19.0 * k - 1.0),
                    1e-6 * k);
    }
    EXPECT_NEAR(welch_degrees_of_freedom(window, 2048, 10), 19.05, 0.005);
}

TEST(StatisticsOutsideTest, QuantilesAreThoseOfPrintedTables) {
    EXPECT_NEAR(chi_square_quantile(0.95, 10), 18.307, 0.0005);
    EXPECT_NEAR(student_t_quantile(0.975, 10), 2.2281, 0.00005);
    EXPECT_NEAR(student_t_quantile(0.995, 16), 2.9208, 0.00005);  // GUM H.1 rounds it to 2.92
}

}  // namespace
}  // namespace coldpin::spectrum
