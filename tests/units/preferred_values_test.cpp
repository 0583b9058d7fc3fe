#include "coldpin/units/preferred_values.h"

#include <algorithm>
#include <cmath>

#include <gtest/gtest.h>

#include "coldpin/units/error.h"

namespace coldpin::units {
namespace {

// IEC 60063, E96 (table from memory; common practice prints it as three digits).
TEST(PreferredValuesTest, E96IsTheStandardsTable) {
    const int table[] = {100, 102, 105, 107, 110, 113, 115, 118, 121, 124, 127, 130, 133, 137, 140, 143,
                         147, 150, 154, 158, 162, 165, 169, 174, 178, 182, 187, 191, 196, 200, 205, 210,
                         215, 221, 226, 232, 237, 243, 249, 255, 261, 267, 274, 280, 287, 294, 301, 309,
                         316, 324, 332, 340, 348, 357, 365, 374, 383, 392, 402, 412, 422, 432, 442, 453,
                         464, 475, 487, 499, 511, 523, 536, 549, 562, 576, 590, 604, 619, 634, 649, 665,
                         681, 698, 715, 732, 750, 768, 787, 806, 825, 845, 866, 887, 909, 931, 953, 976};
    const auto decade = preferred_decade(PreferredSeries::e96);
    ASSERT_EQ(decade.size(), 96U);
    for (std::size_t k = 0; k < 96; ++k) EXPECT_NEAR(decade[k], table[k] / 100.0, 1e-12) << k;
}

TEST(PreferredValuesTest, TheNearestIsFoundInEveryDecade) {
    for (auto series : {PreferredSeries::e24, PreferredSeries::e96}) {
        double widest = 0.0;  // half the widest gap
        const auto decade = preferred_decade(series);
        for (std::size_t k = 0; k < decade.size(); ++k) {
            const double next = k + 1 < decade.size() ? decade[k + 1] : 10.0;
            widest = std::max(widest, 0.5 * std::log(next / decade[k]) + 1e-9);
        }
        for (double wanted = 0.0317; wanted < 4e7; wanted *= 1.0137) {
            const double found = preferred_value(series, wanted);
            EXPECT_LT(std::abs(std::log(found / wanted)), widest) << wanted;
            EXPECT_GE(std::abs(std::log(preferred_value(series, wanted, 1) / wanted)),
                      std::abs(std::log(found / wanted)))
                << wanted;
            EXPECT_LT(preferred_value(series, wanted, -1), found);
            EXPECT_GT(preferred_value(series, wanted, 1), found);
        }
    }
    EXPECT_DOUBLE_EQ(preferred_value(PreferredSeries::e24, 9.9), 10.0);
    EXPECT_NEAR(preferred_value(PreferredSeries::e96, 6810.0), 6810.0, 1e-9);
    EXPECT_THROW(preferred_value(PreferredSeries::e24, 0.0), UsageError);
    EXPECT_THROW(preferred_value(PreferredSeries::e24, -3.0), UsageError);
}

}  // namespace
}  // namespace coldpin::units
