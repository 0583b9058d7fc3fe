#include "coldpin/units/frequency_grid.h"

#include <cmath>

#include <gtest/gtest.h>

#include "coldpin/units/error.h"

namespace coldpin::units {
namespace {

TEST(FrequencyGridTest, HoldsBothEndsExactlyAndEvenSteps) {
    const auto grid = logarithmic_grid(20.0, 20000.0, 3);
    EXPECT_DOUBLE_EQ(grid.front(), 20.0);
    EXPECT_DOUBLE_EQ(grid.back(), 20000.0);
    EXPECT_EQ(grid.size(), 31U);
    for (std::size_t i = 1; i < grid.size(); ++i)
        EXPECT_NEAR(grid[i] / grid[i - 1], std::pow(1000.0, 1.0 / 30.0), 1e-12);
}

TEST(FrequencyGridTest, RefusesWhatIsNoSpan) {
    EXPECT_THROW(logarithmic_grid(20.0, 20.0, 3), UsageError);
    EXPECT_THROW(logarithmic_grid(0.0, 20.0, 3), UsageError);
    EXPECT_THROW(logarithmic_grid(20.0, 200.0, 0), UsageError);
}

}  // namespace
}  // namespace coldpin::units
