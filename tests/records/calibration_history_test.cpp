#include "coldpin/records/calibration_history.h"

#include <fstream>

#include <gtest/gtest.h>

namespace coldpin::records {
namespace {

TEST(CalibrationHistoryTest, EveryCalibrationIsKeptAndADamagedLineLosesOnlyItself) {
    const auto rig = std::filesystem::temp_directory_path() / "coldpin-history-rig.toml";
    const auto path = calibration_history_path(rig);
    std::filesystem::remove(path);
    EXPECT_TRUE(read_calibrations(rig).calibrations.empty());
    rig::Calibration calibration;
    calibration.output_full_scale_dbu = 12.3456789012345;
    calibration.loop_noise_dbfs = -101.5;
    calibration.knobs = "output \"3\"\n";
    append_calibration(rig, calibration);
    // A power cut in the middle of a line.
    std::ofstream(path, std::ios::app) << R"({"schema":"coldpin-calibr)";
    calibration.output_full_scale_dbu = 12.5;
    append_calibration(rig, calibration);
    const auto history = read_calibrations(rig);
    ASSERT_EQ(history.calibrations.size(), 2U);
    EXPECT_EQ(history.damaged_lines, 1U);
    EXPECT_EQ(history.calibrations[0].output_full_scale_dbu, 12.3456789012345);
    EXPECT_EQ(history.calibrations[0].loop_noise_dbfs, -101.5);
    EXPECT_EQ(history.calibrations[0].knobs, calibration.knobs);
    EXPECT_FALSE(history.calibrations[0].loop_dc.has_value());
    EXPECT_EQ(history.calibrations[1].output_full_scale_dbu, 12.5);
    std::filesystem::remove(path);
}

}  // namespace
}  // namespace coldpin::records
