#include "coldpin/spectrum/tone_extent.h"

#include <gtest/gtest.h>

#include "coldpin/units/error.h"

#include "kit/signals.h"

namespace coldpin::spectrum {
namespace {

constexpr double rate = 48000.0;

std::vector<double> placed(std::size_t frames, std::size_t begin, const std::vector<double>& what) {
    std::vector<double> out(frames, 0.0);
    for (std::size_t n = 0; n < what.size(); ++n) out[begin + n] = what[n];
    return out;
}

TEST(ToneExtentTest, FindsWhereAToneSoundsAndStaysInside) {
    auto x = placed(240000, 70000, tests::sine(96000, rate, 997.0, 0.1));
    tests::add(x, tests::white_noise(240000, 1e-4, 1));
    tests::add(x, tests::hum(240000, rate, 50.0, 0.0, {1e-2, 1e-3}));
    for (double& v : x) v += 0.02;
    const auto extent = find_tone(x, rate, 997.0);
    ASSERT_TRUE(extent.found);
    EXPECT_GE(extent.begin, 70000U);
    EXPECT_LE(extent.end, 166000U);
    EXPECT_GT(extent.end - extent.begin, 90000U);
}

TEST(ToneExtentTest, FindsAToneTwentyDecibelsUnderTheNoise) {
    int found = 0;
    for (unsigned seed = 0; seed < 20; ++seed) {
        auto x = placed(240000, 24000, tests::sine(192000, rate, 997.0, 0.1 * std::sqrt(2.0) * 0.01));
        tests::add(x, tests::white_noise(240000, 0.01, seed));
        const auto extent = find_tone(x, rate, 997.0);
        found += extent.found && extent.begin < 60000 && extent.end > 180000;
    }
    EXPECT_EQ(found, 20);
}

TEST(ToneExtentTest, NoiseAloneIsAToneOnceInAThousandAtMost) {
    int alarms = 0;
    for (unsigned seed = 0; seed < 1000; ++seed)
        alarms += find_tone(tests::white_noise(24000, 0.1, seed), rate, 997.0).found;
    EXPECT_LE(alarms, 4);  // one expected at most; five would have a chance of 0.4 %
}

TEST(ToneExtentTest, ASweepPassingByIsNotTheTone) {
    // The tone sounds later than a sweep that passes its frequency, twenty times as loud.
    auto x = placed(288000, 150000, tests::sine(96000, rate, 997.0, 0.01));
    std::vector<double> sweep(96000);
    for (std::size_t n = 0; n < sweep.size(); ++n) {
        const double t = static_cast<double>(n) / rate, constant = 2.0 / std::log(1000.0);
        sweep[n] = 0.2 * std::sin(tests::two_pi * 20.0 * constant * std::exp(t / constant));
    }
    tests::add(x, placed(288000, 10000, sweep));
    tests::add(x, tests::white_noise(288000, 1e-4, 1));
    const auto extent = find_tone(x, rate, 997.0);
    ASSERT_TRUE(extent.found);
    EXPECT_GE(extent.begin, 150000U);
    EXPECT_GT(extent.end - extent.begin, 85000U);
}

TEST(ToneExtentTest, RefusesTooFewPeriods) {
    EXPECT_THROW(find_tone(tests::sine(1000, rate, 100.0, 1.0), rate, 100.0), UsageError);
    EXPECT_THROW(find_tone(tests::sine(1000, rate, 100.0, 1.0), rate, 25000.0), UsageError);
}

}  // namespace
}  // namespace coldpin::spectrum
