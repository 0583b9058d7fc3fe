#include "coldpin/measure/gain.h"

#include <fmt/core.h>
#include <gmock/gmock.h>
#include <gtest/gtest.h>

#include "coldpin/units/error.h"

#include "kit/signals.h"

namespace coldpin::measure {
namespace {

constexpr double rate = 48000.0;

// A tone of -20 dBFS in the middle of a longer recording; the input's full scale is +18 dBu, the drive -40
// dBu: the gain is 38 dB.
std::vector<double> recording(double noise_rms, unsigned seed, double frequency_hz = 997.0,
                              std::size_t tone_frames = 96000) {
    std::vector<double> x(tone_frames + 60000, 0.0);
    const auto tone = tests::sine(tone_frames, rate, frequency_hz, 0.1, 0.7);
    std::copy(tone.begin(), tone.end(), x.begin() + 30000);
    tests::add(x, tests::white_noise(x.size(), noise_rms, seed));
    return x;
}

GainQuestion ask(const std::vector<double>& x) {
    GainQuestion question;
    question.recording = x;
    question.rate_hz = rate;
    question.frequency_hz = 997.0;
    question.drive_dbu = {-40.0, 0.0};
    question.scale.full_scale_dbu = 18.0;
    return question;
}

TEST(GainTest, IsWithinThreeThousandthsAtSixtyDecibelsSignalToNoise) {
    for (unsigned seed = 0; seed < 10; ++seed) {
        const auto x = recording(0.0707e-3, seed);  // 60 dB under the tone
        EXPECT_NEAR(gain(ask(x)).figure("gain")->value, 38.0, 0.003);
    }
}

TEST(GainTest, HumAndOffsetDoNotBendIt) {
    auto x = recording(1e-5, 1);
    tests::add(x, tests::hum(x.size(), rate, 50.03, 0.01, {1e-2, 1e-3, 3e-3}));
    for (double& v : x) v += 0.01;
    EXPECT_NEAR(gain(ask(x)).figure("gain")->value, 38.0, 0.003);
}

// Hum 20 dB under a low tone, down to half a second: there is no whole number of both in the recording, so an
// unweighted fit would be off by up to 0.05 dB.
TEST(GainTest, HumBesideALowToneDoesNotBendIt) {
    for (double hz : {30.0, 75.0, 120.0, 997.0})
        for (std::size_t frames : {28800U, 48000U, 192000U}) {
            auto x = recording(7.07e-5, 1, hz, frames);
            tests::add(x, tests::hum(x.size(), rate, 50.03, 0.0, {1e-2}));
            auto question = ask(x);
            question.frequency_hz = hz;
            EXPECT_NEAR(gain(question).figure("gain")->value, 38.0, 0.003) << hz << " " << frames;
        }
}

// In a quarter of a second hum and a tone 25 Hz beside it cannot be told apart well: the uncertainty must say
// so.
TEST(GainTest, WhatATooShortToneLeavesInDoubtIsInTheUncertainty) {
    for (double phase : {0.0, 1.0, 2.0, 3.0, 4.0, 5.0}) {
        auto x = tests::sine(14400, rate, 75.0, 0.1, phase);
        tests::add(x, tests::sine(14400, rate, 50.03, 1e-2));
        tests::add(x, tests::white_noise(14400, 7e-5, 1));
        auto question = ask(x);
        question.frequency_hz = 75.0;
        const auto figure = *gain(question).figure("gain");
        EXPECT_NEAR(figure.value, 38.0, figure.uncertainty);
    }
}

TEST(GainTest, ALevelThatDriftsIsSaidAndCounted) {
    auto x = tests::sine(96000, rate, 997.0, 0.1);
    for (std::size_t n = 0; n < x.size(); ++n) x[n] *= 1.0 + 0.1 * static_cast<double>(n) / 96000.0;
    const auto findings = gain(ask(x));
    EXPECT_THAT(findings.cautions, testing::Contains(testing::HasSubstr("not steady")));
    EXPECT_GT(findings.figure("gain")->uncertainty, 0.1);
}

TEST(GainTest, AnOverloadedToneIsSaid) {
    auto x = tests::sine(96000, rate, 997.0, 0.1);
    for (double& v : x) v -= 12.0 * v * v * v;  // third harmonic: 12 * 0.1^2 / 4 = 3 %
    EXPECT_THAT(gain(ask(x)).cautions, testing::Contains(testing::HasSubstr("distorted")));
    EXPECT_TRUE(gain(ask(recording(1e-5, 1))).cautions.empty());
}

TEST(GainTest, TheStatedUncertaintyHoldsTheTruth) {
    int inside = 0;
    for (unsigned seed = 0; seed < 200; ++seed) {
        const auto figure = *gain(ask(recording(0.01, seed, 997.0, 12000))).figure("gain");
        inside += std::abs(figure.value - 38.0) <= figure.uncertainty;
        EXPECT_LT(figure.uncertainty, 0.3);
    }
    // 95 % of 200 is 190 with a standard deviation of 3.1.
    EXPECT_GE(inside, 180);
    EXPECT_LE(inside, 199);
}

TEST(GainTest, CalibrationAndDriveCountInTheUncertainty) {
    auto question = ask(recording(1e-6, 1));
    const auto x = recording(1e-6, 1);
    question.recording = x;
    question.scale.uncertainty_db = 0.3;
    question.drive_dbu.uncertainty_db = 0.4;
    EXPECT_NEAR(gain(question).figure("gain")->uncertainty, 0.5, 0.001);
    EXPECT_NEAR(gain(question).figure("output_level")->uncertainty, 0.3, 0.001);
}

TEST(GainTest, PhaseIsOutputMinusReference) {
    auto x = recording(1e-5, 1);
    std::vector<double> reference(x.size(), 0.0);
    const auto tone = tests::sine(96000, rate, 997.0, 0.2, 0.7 - 2.5);  // the output leads by 2.5 rad
    std::copy(tone.begin(), tone.end(), reference.begin() + 30000);
    auto question = ask(x);
    question.reference = reference;
    EXPECT_NEAR(gain(question).figure("phase")->value, 2.5 * 180.0 / std::numbers::pi, 0.01);
}

TEST(GainTest, TwoClocksAreFittedAndSaid) {
    for (double ppm : {-300.0, 80.0})
        for (double hz : {100.0, 997.0, 20000.0}) {
            const auto x = recording(1e-5, 1, hz * (1.0 + ppm * 1e-6), 192000);
            auto question = ask(x);
            question.frequency_hz = hz;
            const auto findings = gain(question);
            EXPECT_NEAR(findings.figure("gain")->value, 38.0, 0.003) << hz << " " << ppm;
            ASSERT_EQ(findings.cautions.size(), 1U) << hz << " " << ppm;
            EXPECT_THAT(findings.cautions.front(), testing::HasSubstr(fmt::format("{:+.1f} ppm", ppm)));
        }
}

TEST(GainTest, AnotherToneIsRefusedAndNamed) {
    for (const auto& [hz, name] : {std::pair{1000.0, "1000 Hz"}, std::pair{998.0, "998 Hz"},
                                   std::pair{1003.0, "1003 Hz"}, std::pair{1500.0, "1500 Hz"}})
        for (std::size_t frames : {4800U, 96000U}) try {
                gain(ask(recording(1e-5, 1, hz, frames)));
                ADD_FAILURE() << hz;
            } catch (const CannotMeasure& error) {
                EXPECT_THAT(error.what(), testing::HasSubstr(name)) << frames;
            }
}

TEST(GainTest, SilenceClippingShortnessAndMissingVoltsAreRefused) {
    std::vector<double> silent(48000, 0.0);
    EXPECT_THROW(gain(ask(silent)), CannotMeasure);
    EXPECT_THROW(gain(ask(tests::white_noise(48000, 0.01, 1))), CannotMeasure);
    auto clipped = tests::sine(48000, rate, 997.0, 1.3);
    for (double& v : clipped) v = std::clamp(v, -1.0, 1.0);
    EXPECT_THROW(gain(ask(clipped)), CannotMeasure);
    EXPECT_THROW(gain(ask(tests::sine(400, rate, 997.0, 0.1))), UsageError);
    const auto x = recording(1e-5, 1);
    auto question = ask(x);
    question.scale.full_scale_dbu.reset();
    EXPECT_THROW(gain(question), UsageError);
}

}  // namespace
}  // namespace coldpin::measure
