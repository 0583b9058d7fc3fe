#include "coldpin/units/level.h"

#include <gtest/gtest.h>

namespace coldpin::units {
namespace {

TEST(LevelTest, ConversionsUndoEachOther) {
    for (double level = -140.0; level <= 30.0; level += 7.3) {
        EXPECT_NEAR(dbu_from_volts_rms(volts_rms_from_dbu(level)), level, 1e-12);
        EXPECT_NEAR(dbfs_from_sample_rms(sample_rms_from_dbfs(level)), level, 1e-12);
        EXPECT_NEAR(dbu_from_dbv(dbv_from_dbu(level)), level, 1e-12);
        EXPECT_NEAR(db_from_ratio(ratio_from_db(level)), level, 1e-12);
        EXPECT_NEAR(db_from_power_ratio(power_ratio_from_db(level)), level, 1e-12);
    }
}

TEST(LevelTest, ASineOfPeakOneIsZeroDbfs) {
    EXPECT_DOUBLE_EQ(sine_peak_from_dbfs(0.0), 1.0);
    EXPECT_NEAR(dbfs_from_sample_rms(1.0 / std::sqrt(2.0)), 0.0, 1e-12);
    // A full-scale square wave, and a constant, are 3.01 dB above it.
    EXPECT_NEAR(dbfs_from_sample_rms(1.0), 3.0103, 1e-4);
}

TEST(LevelTest, AnAmplitudeOnePercentLargerIsAboutItsSlopeInDecibels) {
    EXPECT_NEAR(db_from_ratio(1.01), 0.01 * db_per_relative_amplitude, 0.0005);  // second-order term: 0.00043
}

}  // namespace
}  // namespace coldpin::units
