#include "coldpin/spectrum/mains.h"

#include <gtest/gtest.h>

#include "coldpin/units/error.h"

#include "kit/signals.h"

namespace coldpin::spectrum {
namespace {

constexpr double rate = 48000.0;
const std::vector<double> usual = {1e-3, 2e-4, 5e-4, 1.5e-4, 2.5e-4, 1e-4, 1.2e-4};

struct Case {
    double mains_hz, length_s, stranger_offset_hz;
};
void PrintTo(const Case& c, std::ostream* out) {
    *out << c.mains_hz << "Hz_" << c.length_s << "s_" << c.stranger_offset_hz << "Hz";
}

class MainsTest : public testing::TestWithParam<Case> {};

TEST_P(MainsTest, FindsFrequencyAndHarmonicsThroughDriftBesideALouderTone) {
    const auto& param = GetParam();
    const auto frames = static_cast<std::size_t>(param.length_s * rate);
    auto x = tests::hum(frames, rate, param.mains_hz, 0.03, usual);
    const auto truth = x;
    tests::add(
        x, tests::sine(frames, rate, param.mains_hz + param.stranger_offset_hz, 1e-2));  // 20 dB over the hum
    tests::add(x, tests::sine(frames, rate, 997.0, 1e-2));
    tests::add(x, tests::white_noise(frames, 1e-4, 5));
    const auto fit = fit_mains(x, rate);
    ASSERT_TRUE(fit.found);
    EXPECT_NEAR(fit.frequency_hz, param.mains_hz, 0.003);
    EXPECT_NEAR(fit.drift_hz, 0.03, 0.01);
    for (std::size_t h = 0; h < usual.size(); ++h)
        EXPECT_NEAR(units::db_from_ratio(fit.harmonics[h].amplitude / usual[h]), 0.0, 0.15) << h + 1;
    for (std::size_t h = usual.size(); h < fit.harmonics.size(); ++h)
        EXPECT_FALSE(fit.harmonics[h].significant) << h + 1;
    std::vector<double> left = truth;
    for (std::size_t n = 0; n < frames; ++n) left[n] -= fit.hum[n];
    EXPECT_LT(units::db_from_ratio(tests::rms(left) / tests::rms(truth)), -30.0);
}

INSTANTIATE_TEST_SUITE_P(Mains, MainsTest,
                         testing::Values(Case{50.013, 4.0, 3.1}, Case{50.013, 10.0, 3.1},
                                         Case{59.98, 4.0, 3.1}, Case{59.98, 10.0, 101.3},
                                         Case{49.7, 10.0, 1.3}, Case{50.4, 4.0, 104.3},
                                         Case{60.3, 4.0, -2.9}));

TEST(MainsTest, ARectifiersRippleAloneIsFiftyHertzMainsNotAHundred) {
    for (double mains : {50.0, 60.0}) {
        auto x = tests::hum(240000, rate, mains, 0.0, {0, 1e-3, 0, 3e-4, 0, 1e-4});
        tests::add(x, tests::white_noise(240000, 1e-4, 2));
        const auto fit = fit_mains(x, rate);
        ASSERT_TRUE(fit.found);
        EXPECT_NEAR(fit.frequency_hz, mains, 0.003);
    }
}

TEST(MainsTest, NoiseHasNoMains) {
    int found = 0;
    for (unsigned seed = 0; seed < 100; ++seed)
        found += fit_mains(tests::white_noise(96000, 0.1, seed), rate).found;
    EXPECT_EQ(found, 0);
}

TEST(MainsTest, ATestToneIsNoMains) {
    for (double hz : {220.0, 997.0, 1000.0}) {
        auto x = tests::sine(192000, rate, hz, 0.1);
        tests::add(x, tests::white_noise(192000, 1e-4, 3));
        EXPECT_FALSE(fit_mains(x, rate).found) << hz;
    }
}

TEST(MainsTest, AFundamentalAloneCountsOnlyNearANominalFrequency) {
    for (double hz : {50.02, 59.9, 47.2, 54.0}) {
        auto x = tests::sine(192000, rate, hz, 1e-2);
        tests::add(x, tests::white_noise(192000, 1e-4, 3));
        EXPECT_EQ(fit_mains(x, rate).found, hz == 50.02 || hz == 59.9) << hz;
    }
}

TEST(MainsTest, RefusesLessThanHalfASecond) {
    EXPECT_THROW(fit_mains(std::vector<double>(20000, 0.1), rate), UsageError);
}

}  // namespace
}  // namespace coldpin::spectrum
