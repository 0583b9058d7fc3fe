#include "coldpin/measure/distortion.h"

#include <algorithm>
#include <cmath>

#include <gmock/gmock.h>
#include <gtest/gtest.h>

#include "coldpin/measure/crosstalk.h"
#include "coldpin/units/error.h"

#include "kit/signals.h"

namespace coldpin::measure {
namespace {

constexpr double rate = 48000.0;

// A tone of peak 0.5 with harmonics at known levels re it, noise and hum.
std::vector<double> distorted(double frequency_hz, const std::vector<double>& harmonics_db, double noise_rms,
                              unsigned seed, double length_s = 2.0) {
    const auto frames = static_cast<std::size_t>(length_s * rate);
    auto x = tests::sine(frames, rate, frequency_hz, 0.5);
    for (std::size_t k = 0; k < harmonics_db.size(); ++k)
        tests::add(x, tests::sine(frames, rate, static_cast<double>(k + 2) * frequency_hz,
                                  0.5 * units::ratio_from_db(harmonics_db[k]), 0.7 * static_cast<double>(k)));
    tests::add(x, tests::white_noise(frames, noise_rms, seed));
    return x;
}

Findings asked(const std::vector<double>& x, double frequency_hz) {
    DistortionQuestion question;
    question.recording = x;
    question.rate_hz = rate;
    question.frequency_hz = frequency_hz;
    return distortion(question);
}

double sum_percent(const std::vector<double>& harmonics_db) {
    double sum = 0.0;
    for (double db : harmonics_db) sum += units::power_ratio_from_db(db);
    return 100.0 * std::sqrt(sum);
}

TEST(DistortionTest, KnownHarmonicsAreFoundWithinTheirUncertainty) {
    int inside = 0, all = 0;
    for (double frequency : {97.0, 997.0, 2500.3})
        for (unsigned seed = 1; seed <= 20; ++seed) {
            const std::vector<double> levels = {-60.0, -72.0, -85.0};
            const auto findings = asked(distorted(frequency, levels, 1e-5, seed), frequency);
            for (std::size_t k = 0; k < levels.size(); ++k) {
                const auto* figure = findings.figure("harmonic", {{"harmonic", static_cast<double>(k + 2)}});
                ASSERT_NE(figure, nullptr);
                EXPECT_EQ(figure->bound, Bound::exact);
                EXPECT_NEAR(figure->value, levels[k], 0.3);
                ++all;
                inside += std::abs(figure->value - levels[k]) <= figure->uncertainty;
            }
            const auto* thd = findings.figure("thd");
            ASSERT_NE(thd, nullptr);
            EXPECT_EQ(thd->unit, "%");
            EXPECT_NEAR(thd->value, sum_percent(levels), 0.02 * sum_percent(levels));
        }
    EXPECT_GE(inside, all * 90 / 100);
}

// -120 dB on known truth within 1 dB: ten seconds, noise at -113 dBFS.
TEST(DistortionTest, AHarmonicOfMinus120dBIsMeasured) {
    for (unsigned seed = 1; seed <= 5; ++seed) {
        const auto findings = asked(distorted(997.0, {-120.0}, 1.6e-6, seed, 10.0), 997.0);
        const auto* figure = findings.figure("harmonic", {{"harmonic", 2.0}});
        ASSERT_NE(figure, nullptr);
        EXPECT_EQ(figure->bound, Bound::exact);
        EXPECT_NEAR(figure->value, -120.0, 1.0);
        EXPECT_THAT(findings.cautions, testing::Contains(testing::HasSubstr("converters' own")));
    }
}

TEST(DistortionTest, WhatNoiseHidesIsABound) {
    for (unsigned seed = 1; seed <= 20; ++seed) {
        const auto findings = asked(distorted(997.0, {-130.0}, 1e-3, seed), 997.0);
        const auto* figure = findings.figure("harmonic", {{"harmonic", 2.0}});
        ASSERT_NE(figure, nullptr);
        if (figure->bound == Bound::at_most) {
            EXPECT_GE(figure->value, -130.0);
        }
        EXPECT_LT(figure->value, -70.0);
    }
}

// AES17: residual over everything. White noise of known power alone: its share of the band over the whole.
TEST(DistortionTest, DistortionAndNoiseFollowsTheDefinition) {
    for (unsigned seed = 1; seed <= 10; ++seed) {
        const double noise_rms = 1e-3;
        const auto findings = asked(distorted(997.0, {-66.0}, noise_rms, seed, 4.0), 997.0);
        const double noise_ms = noise_rms * noise_rms * (20000.0 - 20.0) / 24000.0;
        const double harmonic_ms = 0.125 * units::power_ratio_from_db(-66.0);
        const double expected = std::sqrt((noise_ms + harmonic_ms) / (0.125 + noise_ms + harmonic_ms));
        const auto *thd_n = findings.figure("thd_n"), *sinad = findings.figure("sinad");
        ASSERT_NE(thd_n, nullptr);
        // Four seconds of 20 kHz noise are known to 0.3 %; 1 % is three of those.
        EXPECT_NEAR(thd_n->value, 100.0 * expected, expected);
        EXPECT_NEAR(sinad->value, -20.0 * std::log10(expected), 0.1);
        EXPECT_LE(std::abs(sinad->value + 20.0 * std::log10(thd_n->value / 100.0)), 1e-9);
    }
}

// A memoryless nonlinearity's closed form: x + a x^2 makes a second harmonic of a A / 2 re the fundamental.
TEST(DistortionTest, ASquareLawDeviceFollowsItsClosedForm) {
    tests::Device device;
    device.second = 0.01;
    auto x = tests::through(tests::sine(96000, rate, 1000.0, 0.4), device, rate, 96000);
    tests::add(x, tests::white_noise(x.size(), 1e-6, 3));
    const auto findings = asked(x, 1000.0);
    EXPECT_NEAR(findings.figure("harmonic", {{"harmonic", 2.0}})->value, 20.0 * std::log10(0.01 * 0.4 / 2.0),
                0.01);
    EXPECT_NEAR(findings.figure("thd")->value, 0.2, 0.001);
}

TEST(DistortionTest, HumBesideIsNoDistortion) {
    auto x = distorted(997.0, {-80.0}, 1e-6, 1);
    tests::add(x, tests::hum(x.size(), rate, 50.02, 0.0, {1e-3, 2e-4, 5e-4}));
    const auto findings = asked(x, 997.0);
    EXPECT_NEAR(findings.figure("thd")->value, 0.01, 0.0005);
    EXPECT_GT(findings.figure("thd_n")->value, 0.1);  // there it counts
}

TEST(DistortionTest, BadQuestionsAreRefused) {
    const auto x = distorted(997.0, {-60.0}, 1e-5, 1);
    EXPECT_THROW(asked(std::vector<double>(96000, 0.0), 997.0), CannotMeasure);
    EXPECT_THROW(asked(x, 3111.0), CannotMeasure);
    EXPECT_THROW(asked(std::vector<double>(x.begin(), x.begin() + 20), 997.0), Error);
    auto clipped = x;
    for (double& v : clipped) v = std::clamp(3.0 * v, -1.0, 1.0);
    EXPECT_THROW(asked(clipped, 997.0), CannotMeasure);
    // 15 kHz has no harmonic within 20 kHz: said, not invented.
    const auto high = asked(distorted(15000.0, {}, 1e-5, 1), 15000.0);
    EXPECT_EQ(high.figure("thd"), nullptr);
    EXPECT_NE(high.figure("thd_n"), nullptr);
    EXPECT_THAT(high.cautions, testing::Contains(testing::HasSubstr("no harmonic")));
}

TEST(CrosstalkTest, AKnownLeakIsFoundAndNoiseBoundsIt) {
    const auto driven = distorted(1000.0, {}, 1e-5, 1);
    for (double db : {-40.0, -70.0, -95.0}) {
        auto quiet = tests::white_noise(driven.size(), 1e-5, 2);
        tests::add(quiet, tests::sine(driven.size(), rate, 1000.0, 0.5 * units::ratio_from_db(db), 1.1));
        CrosstalkQuestion question{driven, quiet, rate, 1000.0, {}};
        const auto findings = crosstalk(question);
        const auto* figure = findings.figure("crosstalk");
        ASSERT_NE(figure, nullptr);
        EXPECT_EQ(figure->bound, Bound::exact);
        EXPECT_NEAR(figure->value, db, std::max(0.01, 1.5 * figure->uncertainty));
    }
    const auto silent = tests::white_noise(driven.size(), 1e-3, 3);
    CrosstalkQuestion question{driven, silent, rate, 1000.0, {}};
    EXPECT_LT(crosstalk(question).figure("crosstalk")->value, -85.0);
    question.quiet = std::span<const double>(silent).first(100);
    EXPECT_THROW(crosstalk(question), UsageError);
}

}  // namespace
}  // namespace coldpin::measure
