#include "coldpin/rig/meter.h"

#include <cmath>
#include <random>

#include <gmock/gmock.h>
#include <gtest/gtest.h>

#include "coldpin/units/error.h"
#include "coldpin/units/level.h"

namespace coldpin::rig {
namespace {

using testing::HasSubstr;

TEST(MeterTest, ReadingsAsPeopleTypeThem) {
    for (const char* text :
         {"1.228 V", "1.228V", " 1228 mV", "1228mV", "1,228 V", "1.228 VAC", "+1.228 Vrms"})
        EXPECT_NEAR(parse_meter_reading(text).volts_rms, 1.228, 1e-12) << text;
    EXPECT_NEAR(parse_meter_reading("1.228 V").resolution_volts, 0.001, 1e-12);
    EXPECT_NEAR(parse_meter_reading("1228 mV").resolution_volts, 0.001, 1e-12);
    EXPECT_NEAR(parse_meter_reading("12.3 V").resolution_volts, 0.1, 1e-12);
    // +4 dBu is 1.2277 V (IEC 60268-2's reference of 0.775 V; common practice).
    EXPECT_NEAR(parse_meter_reading("+4 dBu").volts_rms, 1.22766, 1e-5);
    EXPECT_NEAR(parse_meter_reading("0 dBV").volts_rms, 1.0, 1e-12);
}

TEST(MeterTest, WhatCannotBeIsRefusedInWords) {
    const auto said = [](const char* text) -> std::string {
        try {
            parse_meter_reading(text);
        } catch (const UsageError& error) {
            return error.what();
        }
        return "";
    };
    EXPECT_THAT(said("40 V"), HasSubstr("no line output"));
    EXPECT_THAT(said("0.2 mV"), HasSubstr("in front of the pad"));
    EXPECT_THAT(said("1.2"), HasSubstr("without its unit"));
    EXPECT_THAT(said("1.2 A"), HasSubstr("'A' is no unit"));
    EXPECT_THAT(said("3.4 Vpp"), HasSubstr("RMS"));
    for (const char* text : {"", "volts", "-1 V", "0 V", "nan V", "inf V", "0x10 V", "1.2.3 V"})
        EXPECT_NE(said(text), "") << text;
}

// Accuracy classes as common practice states them: 1.00 % is 0.086 dB at its limit; 1.2 % + 3 counts at 1.23
// V on a range of 19.99 V is 0.31 dB at its limit. The expanded uncertainty of a rectangle is 2/sqrt(3) of
// that.
TEST(MeterTest, AccuracyBecomesUncertainty) {
    const double widen = 2.0 / std::sqrt(3.0);
    EXPECT_NEAR(meter_uncertainty_db({1.0, 1e-9}, {1.0, 0.0, 2000.0, true}),
                20.0 * std::log10(1.0 + 0.01 * widen), 1e-6);
    const double limit = (0.012 * 1.23 + 0.03) / 1.23;
    EXPECT_NEAR(20.0 * std::log10(1.0 + limit), 0.31, 0.005);
    EXPECT_NEAR(meter_uncertainty_db({1.23, 0.01}, {1.2, 3.0, 2000.0, true}),
                20.0 * std::log10(1.0 + limit * widen), 0.003);
    // Average-responding: a third harmonic of 3 % can shift it by 1 %.
    EXPECT_GT(meter_uncertainty_db({1.0, 1e-9}, {0.1, 0.0, 2000.0, false}, 0.03),
              meter_uncertainty_db({1.0, 1e-9}, {0.1, 0.0, 2000.0, true}, 0.03) + 0.05);
}

// The GUM's own example of a rectangular distribution (JCGM 100, 4.3.7): limits of 0.40 give a standard
// uncertainty of 0.23; expanded twice that.
TEST(MeterTest, ARectangleIsTheGumsExample) {
    const double relative =
        std::pow(10.0, meter_uncertainty_db({1.0, 1e-12}, {0.40, 0.0, 2000.0, true}) / 20.0) - 1.0;
    EXPECT_NEAR(100.0 * relative / 2.0, 0.23, 0.005);
}

// Random meters inside their stated limits: the true value lies within the stated uncertainty at least 95
// times in 100.
TEST(MeterTest, TheUncertaintyHolds) {
    std::mt19937 random(4);
    std::uniform_real_distribution<double> either(-1.0, 1.0);
    int inside = 0;
    const int rounds = 4000;
    for (int i = 0; i < rounds; ++i) {
        const double volts = 0.5 + 1.4 * (0.5 + 0.5 * either(random));
        const MeterAccuracy accuracy{0.5, 3.0, 2000.0, true};
        const double shown = volts + either(random) * (0.005 * volts + 0.003);
        const double rounded = std::round(shown * 1000.0) / 1000.0;
        const double error = std::abs(units::db_from_ratio(rounded / volts));
        inside += error <= meter_uncertainty_db({rounded, 0.001}, accuracy);
    }
    EXPECT_GE(inside, rounds * 95 / 100);
}

TEST(MeterTest, TheRangeThatHalvesTheUncertaintyIsNamed) {
    const MeterAccuracy accuracy{0.5, 3.0, 2000.0, true};
    // 1.23 V on the 20 V range: the 2 V range holds it.
    auto advice = advise_range({1.23, 0.01}, accuracy, 6.0);
    ASSERT_TRUE(advice.has_value());
    EXPECT_EQ(advice->level_change_db, 0.0);
    EXPECT_THAT(advice->sentence, HasSubstr("2 V range"));
    EXPECT_LT(advice->uncertainty_db, 0.5 * meter_uncertainty_db({1.23, 0.01}, accuracy));
    // 2.4 V on the 20 V range: a little lower fits the 2 V range.
    advice = advise_range({2.4, 0.01}, accuracy, 0.0);
    ASSERT_TRUE(advice.has_value());
    EXPECT_NEAR(advice->level_change_db, 20.0 * std::log10(1.9 / 2.4), 1e-9);
    // 0.15 V on the 2 V range with room above: higher.
    advice = advise_range({0.25, 0.001}, {0.2, 5.0, 2000.0, true}, 12.0);
    ASSERT_TRUE(advice.has_value());
    // Where the percentage decides there is nothing to gain.
    EXPECT_FALSE(advise_range({1.9, 0.001}, accuracy, 6.0).has_value());
}

}  // namespace
}  // namespace coldpin::rig
