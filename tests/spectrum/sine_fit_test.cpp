#include "coldpin/spectrum/sine_fit.h"

#include <gtest/gtest.h>

#include "coldpin/units/error.h"

#include "kit/signals.h"

namespace coldpin::spectrum {
namespace {

TEST(SineFitTest, FindsAmplitudePhaseAndOffsetExactly) {
    auto x = tests::sine(12345, 48000.0, 997.3, 0.3, 1.1);
    for (double& v : x) v += 0.05;
    const auto fit = fit_sine(x, 48000.0, 997.3);
    EXPECT_NEAR(std::abs(fit.phasor), 0.3, 1e-12);
    EXPECT_NEAR(std::arg(fit.phasor), 1.1, 1e-11);
    EXPECT_NEAR(fit.offset, 0.05, 1e-12);
    EXPECT_LT(fit.residual_mean_square, 1e-24);
}

TEST(SineFitTest, FindsAFrequencyHalfABinAway) {
    const auto x = tests::sine(48000, 48000.0, 1000.37, 0.3, -2.0);
    const auto fit = fit_sine_and_frequency(x, 48000.0, 1000.0);
    EXPECT_NEAR(fit.frequency_hz, 1000.37, 1e-8);
    EXPECT_NEAR(std::abs(fit.phasor), 0.3, 1e-9);
}

TEST(SineFitTest, RefusesWhereNoToneIsNear) {
    EXPECT_THROW(fit_sine_and_frequency(tests::sine(48000, 48000.0, 1100.0, 0.3), 48000.0, 1000.0),
                 CannotMeasure);
    EXPECT_THROW(fit_sine(tests::sine(20, 48000.0, 100.0, 1.0), 48000.0, 100.0), UsageError);
    EXPECT_THROW(fit_sine(tests::sine(2000, 48000.0, 100.0, 1.0), 48000.0, 30000.0), UsageError);
}

TEST(SineFitTest, TonesFittedTogetherDoNotDisturbEachOther) {
    const std::vector<double> tones = {100.0, 101.7, 997.0, 15000.0};
    std::vector<double> x(48000, 0.01);
    for (std::size_t k = 0; k < tones.size(); ++k)
        tests::add(x, tests::sine(48000, 48000.0, tones[k], 0.1 * static_cast<double>(k + 1),
                                  static_cast<double>(k)));
    const auto fit = fit_sines(x, 48000.0, tones);
    for (std::size_t k = 0; k < tones.size(); ++k) {
        EXPECT_NEAR(std::abs(fit.phasors[k]), 0.1 * static_cast<double>(k + 1), 1e-10);
        EXPECT_NEAR(std::arg(fit.phasors[k]), static_cast<double>(k), 1e-9);
    }
    EXPECT_NEAR(fit.offset, 0.01, 1e-11);
    const std::vector<double> too_close = {100.0, 100.5};
    EXPECT_THROW(fit_sines(x, 48000.0, too_close), UsageError);
}

TEST(SineFitTest, NoiseBesideAToneIsMeasuredPastHumLines) {
    auto x = tests::white_noise(480000, 1e-3, 8);
    tests::add(x, tests::sine(480000, 48000.0, 997.0, 0.5));
    tests::add(x, tests::hum(480000, 48000.0, 50.02, 0.0, std::vector<double>(24, 1e-3)));
    const double truth = 1e-6 / 24000.0;
    // The median of some 80 bins with about 70 degrees of freedom each: 3 % standard deviation.
    EXPECT_NEAR(noise_density_near(x, 48000.0, 997.0, 50.0), truth, 0.15 * truth);
}

}  // namespace
}  // namespace coldpin::spectrum
