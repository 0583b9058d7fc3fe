#include "coldpin/measure/hum.h"

#include <gtest/gtest.h>

#include "coldpin/units/error.h"

#include "kit/signals.h"

namespace coldpin::measure {
namespace {

constexpr double rate = 48000.0;
const std::vector<double> peaks = {1e-3, 2e-4, 5e-4, 1e-4, 2.5e-4};

HumQuestion ask(const std::vector<double>& x) {
    HumQuestion question;
    question.recording = x;
    question.rate_hz = rate;
    return question;
}

TEST(HumTest, HarmonicsTheirSumAndTheNoiseWithoutThem) {
    auto x = tests::hum(240000, rate, 50.013, 0.03, peaks);
    tests::add(x, tests::white_noise(240000, 2e-4, 5));
    const auto findings = hum(ask(x));
    EXPECT_NEAR(findings.figure("mains_frequency")->value, 50.013, 0.003);
    double power = 0.0;
    for (std::size_t h = 0; h < peaks.size(); ++h) {
        const auto* figure = findings.figure("hum_harmonic", {{"harmonic", static_cast<double>(h + 1)}});
        ASSERT_NE(figure, nullptr);
        EXPECT_NEAR(figure->value, units::dbfs_from_sample_rms(peaks[h] / std::sqrt(2.0)), 0.15);
        power += 0.5 * peaks[h] * peaks[h];
    }
    EXPECT_NEAR(findings.figure("hum_output")->value, units::dbfs_from_sample_rms(std::sqrt(power)), 0.1);
    const double noise_in_band = 4e-8 * 19980.0 / 24000.0;
    EXPECT_NEAR(findings.figure("hum_to_noise")->value, units::db_from_power_ratio(power / noise_in_band),
                0.15);
    EXPECT_EQ(findings.figure("hum_output")->unit, "dBFS");
}

TEST(HumTest, WithAScaleAndAGainItIsReferredToTheInput) {
    auto x = tests::hum(240000, rate, 60.02, 0.0, peaks);
    tests::add(x, tests::white_noise(240000, 1e-5, 5));
    auto question = ask(x);
    question.scale = {18.0, 0.1};
    question.gain_db = KnownLevel{40.0, 0.2};
    const auto findings = hum(question);
    EXPECT_NEAR(findings.figure("hum_input_referred")->value, findings.figure("hum_output")->value - 40.0,
                1e-9);
    EXPECT_NEAR(findings.figure("hum_input_referred")->uncertainty, std::hypot(0.1, 0.2), 0.03);
}

TEST(HumTest, WithoutHumOnlyABoundIsGiven) {
    const auto x = tests::white_noise(192000, 1e-4, 5);
    const auto findings = hum(ask(x));
    EXPECT_EQ(findings.figure("mains_frequency"), nullptr);
    EXPECT_EQ(findings.figure("hum_output")->bound, Bound::at_most);
    EXPECT_FALSE(findings.cautions.empty());
}

TEST(HumTest, HumOutsideTheBandIsNamedButNotCounted) {
    auto x = tests::hum(192000, rate, 50.02, 0.0, {1e-3});
    tests::add(x, tests::white_noise(192000, 1e-5, 5));
    auto question = ask(x);
    question.band = {120.0, 20000.0};
    const auto findings = hum(question);
    EXPECT_NEAR(findings.figure("mains_frequency")->value, 50.02, 0.003);
    EXPECT_EQ(findings.figure("hum_output")->bound, Bound::at_most);
    EXPECT_LT(findings.figure("hum_output")->value, -100.0);  // the line itself is at -60 dBFS
    question.band = {20.0, 20000.0};
    EXPECT_NEAR(hum(question).figure("hum_output")->value, -60.0, 0.15);
}

// A line of the bound's own level is found: the bound is not below what stands out.
TEST(HumTest, TheBoundIsWhereALineWouldBeginToStandOut) {
    const auto x = tests::white_noise(192000, 1e-4, 5);
    const double bound = hum(ask(x)).figure("hum_output")->value;
    auto louder = x;
    tests::add(louder, tests::sine(192000, rate, 50.0, units::sine_peak_from_dbfs(bound + 6.0)));
    EXPECT_EQ(hum(ask(louder)).figure("hum_output")->bound, Bound::exact);
    EXPECT_NEAR(
        bound, units::dbfs_from_sample_rms(4.5 * 1e-4 * std::sqrt(2.0044 / (24000.0 * 4.0)) / std::sqrt(2.0)),
        1.0);
}

TEST(HumTest, HumThatTheInterfaceHearsAloneIsNotTheUnits) {
    auto x = tests::hum(192000, rate, 50.0, 0.0, peaks);
    tests::add(x, tests::white_noise(192000, 1e-5, 5));
    auto beside = tests::hum(192000, rate, 50.0, 0.0, peaks);
    tests::add(beside, tests::white_noise(192000, 1e-5, 6));
    auto question = ask(x);
    question.interface_beside = beside;
    const auto findings = hum(question);
    for (const char* quantity : {"hum_output", "hum_harmonic", "hum_to_noise"})
        EXPECT_EQ(findings.figure(quantity)->bound, Bound::at_most) << quantity;
}

TEST(HumTest, SilenceAndShortnessAreRefused) {
    EXPECT_THROW(hum(ask(std::vector<double>(96000, 0.0))), CannotMeasure);
    EXPECT_THROW(hum(ask(std::vector<double>(9600, 0.01))), UsageError);
}

}  // namespace
}  // namespace coldpin::measure
