#include "coldpin/report/words.h"

#include <gtest/gtest.h>

namespace coldpin::report {
namespace {

using measure::Bound;
using measure::Figure;

TEST(WordsTest, ValuesHaveTheDigitsTheirUncertaintySupports) {
    EXPECT_EQ(value_text({"gain", 40.06931, "dB", 0.087, 2.0, Bound::exact, {}}), "40.069 dB");
    EXPECT_EQ(uncertainty_text({"gain", 40.06931, "dB", 0.087, 2.0, Bound::exact, {}}), "± 0.087");
    EXPECT_EQ(value_text({"noise_output", -83.123, "dBu", 1.3, 2.0, Bound::exact, {}}), "-83.1 dBu");
    EXPECT_EQ(value_text({"upper_corner", 22000.0, "Hz", 0.0, 2.0, Bound::at_least, {}}), "≥ 22.00 kHz");
    EXPECT_EQ(uncertainty_text({"upper_corner", 22000.0, "Hz", 0.0, 2.0, Bound::at_least, {}}), "");
    EXPECT_EQ(value_text({"hum_output", -120.04, "dBu", 0.2, 2.0, Bound::at_most, {}}), "≤ -120.04 dBu");
    EXPECT_EQ(value_text({"polarity", -1.0, "", 0.0, 2.0, Bound::exact, {}}), "inverted (-1)");
    EXPECT_EQ(value_text({"phase", -0.0001, "degree", 0.02, 2.0, Bound::exact, {}}),
              "0.000 degree");  // no minus nothing
}

TEST(WordsTest, LimitsAndQuantitiesReadAsTheTradeSaysThem) {
    profile::Requirement requirement;
    requirement.quantity = "gain";
    requirement.unit = "dB";
    requirement.min = 39.5;
    requirement.max = 40.5;
    EXPECT_EQ(limit_text(requirement), "39.5 to 40.5 dB");
    requirement.max.reset();
    EXPECT_EQ(limit_text(requirement), "at least 39.5 dB");
    requirement = {};
    requirement.quantity = "upper_corner";
    requirement.unit = "Hz";
    requirement.min = 20000;
    EXPECT_EQ(limit_text(requirement), "at least 20 kHz");
    requirement.quantity = "polarity";
    requirement.unit = "";
    requirement.min = 1;
    EXPECT_EQ(limit_text(requirement), "upright");
    EXPECT_EQ(quantity_text("common_mode_rejection", {{"frequency_hz", 9973.0}}),
              "common-mode rejection at 9.973 kHz");
    EXPECT_EQ(quantity_text("noise_input_referred", {{"weighting", std::string("A")}}),
              "noise at the input, A-weighted");
    EXPECT_EQ(frequency_text(50.024), "50.02 Hz");
    EXPECT_EQ(frequency_text(1000.0), "1 kHz");
    EXPECT_EQ(margin_text(0.434), "+0.43");
    EXPECT_EQ(margin_text(-2000.4), "-2000");
}

}  // namespace
}  // namespace coldpin::report
