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

TEST(ClippingTest, SilenceIsNotClippedButRefused) {
    const std::vector<double> silent(1000, 0.0);
    EXPECT_FALSE(find_clipping(silent).clipped());
    EXPECT_THROW(require_not_silent(silent, "it"), CannotMeasure);
    EXPECT_NO_THROW(require_not_silent(tests::sine(100, 48000.0, 997.0, 1e-6), "it"));
}

}  // namespace
}  // namespace coldpin::measure
