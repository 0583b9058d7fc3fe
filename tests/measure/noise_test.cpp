#include "coldpin/measure/noise.h"

#include <chrono>

#include <gmock/gmock.h>
#include <gtest/gtest.h>

#include "coldpin/spectrum/weighting.h"
#include "coldpin/units/error.h"
#include "coldpin/units/physics.h"

#include "kit/signals.h"

namespace coldpin::measure {
namespace {

constexpr double rate = 48000.0;

NoiseQuestion ask(const std::vector<double>& x) {
    NoiseQuestion question;
    question.recording = x;
    question.rate_hz = rate;
    return question;
}

double level(const Findings& findings, const std::string& weighting, const char* quantity = "noise_output") {
    return findings.figure(quantity, {{"weighting", weighting}})->value;
}

// Level of white noise of an RMS, weighted, from the formula by fine integration.
double expected_level(double rms_samples, spectrum::Weighting weighting, double low_hz = 20.0,
                      double high_hz = 20000.0) {
    constexpr int steps = 40000;
    double sum = 0.0;
    for (int i = 0; i < steps; ++i) {
        const double w = spectrum::weighting_gain(weighting, low_hz + (i + 0.5) * (high_hz - low_hz) / steps);
        sum += w * w * (high_hz - low_hz) / steps;
    }
    return units::dbfs_from_sample_rms(rms_samples * std::sqrt(sum / (0.5 * rate)));
}

TEST(NoiseTest, FourSecondsGiveEachWeightingWithinATenthOfADecibel) {
    for (unsigned seed = 0; seed < 5; ++seed) {
        const auto x = tests::white_noise(192000, 1e-3, seed);
        const auto findings = noise(ask(x));
        for (auto weighting : {spectrum::Weighting::none, spectrum::Weighting::a, spectrum::Weighting::c,
                               spectrum::Weighting::itu468})
            EXPECT_NEAR(level(findings, std::string(spectrum::weighting_name(weighting))),
                        expected_level(1e-3, weighting), 0.1);
    }
}

// A sine in the band has the level of the formula whatever its frequency: weighting is exact.
TEST(NoiseTest, WeightsMatchThePublishedFormulaAtEveryFrequency) {
    for (double hz : {25.0, 63.0, 250.0, 1000.0, 3150.0, 6300.0, 12500.0, 19000.0}) {
        const auto x = tests::sine(192000, rate, hz, 0.01);
        const auto findings = noise(ask(x));
        for (auto weighting : {spectrum::Weighting::a, spectrum::Weighting::c, spectrum::Weighting::itu468})
            EXPECT_NEAR(level(findings, std::string(spectrum::weighting_name(weighting))),
                        units::dbfs_from_sample_rms(0.01 / std::sqrt(2.0)) +
                            units::db_from_ratio(spectrum::weighting_gain(weighting, hz)),
                        0.02)
                << hz;
    }
}

TEST(NoiseTest, TheStatedUncertaintyHoldsTheTruth) {
    for (const char* weighting : {"none", "A"}) {
        int inside = 0;
        const double truth = expected_level(
            1e-3, weighting[0] == 'A' ? spectrum::Weighting::a : spectrum::Weighting::none, 20.0, 2000.0);
        for (unsigned seed = 0; seed < 300; ++seed) {
            const auto x = tests::white_noise(96000, 1e-3, seed);
            auto question = ask(x);
            question.band = {20.0, 2000.0};  // a narrow band, where chance is largest
            const auto figure =
                *noise(question).figure("noise_output", {{"weighting", std::string(weighting)}});
            inside += std::abs(figure.value - truth) <= figure.uncertainty;
        }
        // 95 % of 300 is 285 with a standard deviation of 3.8: four of those either way.
        EXPECT_GE(inside, 270) << weighting;
        EXPECT_LE(inside, 299) << weighting;
    }
}

TEST(NoiseTest, AHumLineDoesNotBlowUpTheUncertainty) {
    auto x = tests::white_noise(192000, 1e-4, 1);
    tests::add(x, tests::sine(192000, rate, 50.0, 1e-2));
    const auto findings = noise(ask(x));
    EXPECT_LT(findings.figure("noise_output")->uncertainty, 0.1);
    EXPECT_THAT(findings.cautions, testing::Contains(testing::HasSubstr("near 50")));
}

TEST(NoiseTest, ReferredToTheInputItIsTheResistorsOwn) {
    // 150 ohm at 20 degC through an ideal 60 dB amplifier, recorded where 0 dBFS is +18 dBu.
    const double density_v = units::thermal_noise_density_v(150.0, 293.15) * 1000.0;
    const double volts_per_unit = units::volts_rms_from_dbu(18.0) / units::sample_rms_at_0_dbfs;
    const auto x = tests::white_noise(480000, density_v * std::sqrt(24000.0) / volts_per_unit, 3);
    auto question = ask(x);
    question.scale.full_scale_dbu = 18.0;
    question.gain_db = KnownLevel{60.0, 0.05};
    question.source_ohms = 150.0;
    const auto findings = noise(question);
    EXPECT_NEAR(level(findings, "none", "noise_input_referred"), -130.92, 0.06);
    // At 20 degC instead of 290 K the resistor's share is corrected: an ideal amplifier has 0 dB.
    EXPECT_NEAR(findings.figure("noise_figure")->value, 0.0, 0.06);
    const Curve& density = *findings.curve("noise_density");
    double mean = 0.0;
    for (double y : density.y) mean += y * y / static_cast<double>(density.y.size());
    EXPECT_NEAR(std::sqrt(mean) / density_v, 1.0, 0.02);
}

TEST(NoiseTest, BelowTheSourcesOwnNoiseIsRefusedWithTheLikelyCause) {
    const auto x = tests::white_noise(192000, 1e-6, 3);
    auto question = ask(x);
    question.scale.full_scale_dbu = 18.0;
    question.gain_db = KnownLevel{60.0, 0.05};
    question.source_ohms = 150.0;
    try {
        noise(question);
        FAIL();
    } catch (const CannotMeasure& error) {
        EXPECT_THAT(error.what(), testing::HasSubstr("physically impossible"));
        EXPECT_THAT(error.what(), testing::HasSubstr("dBFS taken for dBu"));
    }
    question.gain_db->value_db = 20.0;  // the same recording behind 20 dB is noisy enough
    EXPECT_NO_THROW(noise(question));
}

TEST(NoiseTest, TheInterfacesNoiseIsSubtractedAsPower) {
    auto x = tests::white_noise(960000, 1e-4, 1);
    const auto idle = tests::white_noise(960000, 1e-4, 2);
    tests::add(x, tests::white_noise(960000, 2e-4, 3));
    auto question = ask(x);
    question.interface_idle = idle;
    const auto figure = *noise(question).figure("noise_output");
    EXPECT_EQ(figure.bound, Bound::exact);
    EXPECT_NEAR(figure.value, expected_level(2e-4, spectrum::Weighting::none), figure.uncertainty);
    EXPECT_LT(figure.uncertainty, 0.1);
}

TEST(NoiseTest, WhereTheInterfaceDrownsTheUnitOnlyABoundIsGiven) {
    auto x = tests::white_noise(192000, 1e-4, 1);
    const auto idle = tests::white_noise(192000, 1e-4, 2);
    tests::add(x, tests::white_noise(192000, 3e-5, 3));
    for (const bool beside : {false, true}) {
        auto question = ask(x);
        (beside ? question.interface_beside : question.interface_idle) = idle;
        const auto findings = noise(question);
        EXPECT_EQ(findings.figure("noise_output")->bound, Bound::at_most);
        EXPECT_GE(findings.figure("noise_output")->value, expected_level(3e-5, spectrum::Weighting::none));
        EXPECT_FALSE(findings.cautions.empty());
    }
}

TEST(NoiseTest, UnfitBandsAndRecordingsAreRefused) {
    const auto x = tests::white_noise(48000, 1e-4, 1);
    auto question = ask(x);
    question.band = {20.0, 30000.0};
    EXPECT_THROW(noise(question), UsageError);
    question.band = {200.0, 100.0};
    EXPECT_THROW(noise(question), UsageError);
    EXPECT_THROW(noise(ask(std::vector<double>(5000, 0.1))), UsageError);
    EXPECT_THROW(noise(ask(std::vector<double>(48000, 0.0))), CannotMeasure);
}

}  // namespace
}  // namespace coldpin::measure
