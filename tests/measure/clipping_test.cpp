#include "coldpin/measure/clipping.h"

#include <gtest/gtest.h>

#include "coldpin/units/error.h"

#include "kit/signals.h"

namespace coldpin::measure {
namespace {

std::vector<double> limited(std::vector<double> x, double limit) {
    for (double& v : x) v = std::clamp(v, -limit, limit);
    return x;
}

TEST(ClippingTest, FullScaleIsClippingAndJustBelowIsNot) {
    EXPECT_TRUE(find_clipping(limited(tests::sine(4800, 48000.0, 997.0, 1.05), 1.0)).clipped());
    EXPECT_FALSE(find_clipping(tests::sine(4800, 48000.0, 997.0, 0.999)).clipped());
}

TEST(ClippingTest, AFlatTopBelowFullScaleIsClippingToo) {
    EXPECT_TRUE(find_clipping(limited(tests::sine(4800, 48000.0, 997.0, 0.6), 0.5)).clipped());
    EXPECT_TRUE(find_clipping(limited(tests::sine(4800, 48000.0, 220.0, 0.51), 0.5)).clipped());
}

TEST(ClippingTest, CrestsOfOrdinaryTonesAreNotFlat) {
    for (double hz : {20.0, 50.0, 220.0, 997.0, 1000.0, 12000.0, 16000.0})
        EXPECT_FALSE(find_clipping(tests::sine(48000, 48000.0, hz, 0.5)).clipped()) << hz;
}

// Rounded to 16 bits, the crest of a slow sine holds one value for several samples by nature; a limiter on
// the same sine holds it for longer than the sine bends.
TEST(ClippingTest, ARoundedCrestIsNotFlatButALimitedOneIs) {
    const auto rounded = [](std::vector<double> x) {
        for (double& v : x) v = std::round(v * 32768.0) / 32768.0;
        return x;
    };
    for (double peak : {0.123, 0.3, 0.40002, 0.5, 0.77, 0.999})
        for (double hz : {20.0, 30.0, 50.0, 100.0, 997.0}) {
            const auto x = tests::sine(96000, 48000.0, hz, peak, 0.3);
            EXPECT_FALSE(find_clipping(rounded(x)).clipped()) << peak << " at " << hz;
            EXPECT_TRUE(find_clipping(rounded(limited(x, 0.98 * peak))).clipped()) << peak << " at " << hz;
        }
}

TEST(ClippingTest, AClickOverExactSilenceIsNotAFlatTop) {
    std::vector<double> x(48000, 0.0);
    x[20000] = 0.5;
    EXPECT_FALSE(find_clipping(x).clipped());
}

TEST(ClippingTest, OnePeakAtFullScaleIsForgivenTwoAreNot) {
    auto x = tests::white_noise(4800, 0.1, 1);
    x[100] = 1.0;
    EXPECT_FALSE(find_clipping(x).clipped());
    x[200] = -1.0;
    EXPECT_TRUE(find_clipping(x).clipped());
    EXPECT_EQ(find_clipping(x).samples_at_full_scale, 2U);
}

TEST(ClippingTest, AnOffsetAloneIsNoSignal) {
    EXPECT_THROW(require_not_silent(std::vector<double>(1000, 0.1), "it"), CannotMeasure);
}

TEST(ClippingTest, SilenceIsNotClippedButRefused) {
    const std::vector<double> silent(1000, 0.0);
    EXPECT_FALSE(find_clipping(silent).clipped());
    EXPECT_THROW(require_not_silent(silent, "it"), CannotMeasure);
    EXPECT_NO_THROW(require_not_silent(tests::sine(100, 48000.0, 997.0, 1e-6), "it"));
}

}  // namespace
}  // namespace coldpin::measure
