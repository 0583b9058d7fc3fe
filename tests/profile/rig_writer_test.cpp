#include "coldpin/profile/rig_writer.h"

#include <filesystem>
#include <fstream>

#include <gtest/gtest.h>

#include "coldpin/profile/fixture_file.h"
#include "coldpin/profile/rig_file.h"
#include "coldpin/signal/text_file.h"
#include "coldpin/units/error.h"

namespace coldpin::profile {
namespace {

const std::string rig_text =
    signal::read_text_file(std::string(COLDPIN_SOURCE_DIR) + "/profiles/rigs/two-output-interface.toml");

TEST(RigWriterTest, OnlyTheTableThatIsMeantChanges) {
    const std::string text =
        "# mine\n[a]\nx = 1\n\n# about b\n[b] # here\ny = 2\n# gone\nz = 3\n\n# about c\n[c]\nv = 4\n";
    EXPECT_EQ(with_table(text, "b", "y = 5\n"),
              "# mine\n[a]\nx = 1\n\n# about b\n[b]\ny = 5\n\n# about c\n[c]\nv = 4\n");
    std::string last = text;
    EXPECT_EQ(with_table(text, "c", "v = 6\n"), last.replace(last.find("v = 4"), 5, "v = 6"));
    EXPECT_EQ(with_table("[a]\nx = 1\n", "b", "y = 2\n"), "[a]\nx = 1\n\n[b]\ny = 2\n");
    EXPECT_EQ(with_table("[b]\nx = 1\n[b.c]\ny = 1\n[d]\n", "b", "z = 2\n"), "[b]\nz = 2\n\n[d]\n");
}

TEST(RigWriterTest, ACalibrationWrittenIsTheCalibrationRead) {
    rig::Calibration calibration;
    calibration.output_full_scale_dbu = 13.1234;
    calibration.output_uncertainty_db = 0.0512;
    calibration.input_full_scale_dbu = 15.5;
    calibration.input_uncertainty_db = 0.06;
    calibration.reference_full_scale_dbu = 14.0;
    calibration.time_utc = "2026-05-04T09:03:07Z";
    calibration.knobs = "output at \"line\", input \\ left";
    calibration.loop_noise_dbfs = -101.25;
    const std::string text = with_table(rig_text, "calibration", calibration_lines(calibration));
    const auto read = *rig_from_text(text, "rig.toml").setup.calibration;
    EXPECT_NEAR(read.output_full_scale_dbu, 13.1234, 1e-9);
    EXPECT_NEAR(read.output_uncertainty_db, 0.0512, 1e-9);
    EXPECT_NEAR(*read.reference_full_scale_dbu, 14.0, 1e-9);
    EXPECT_EQ(read.knobs, calibration.knobs);
    EXPECT_NEAR(*read.loop_noise_dbfs, -101.25, 1e-9);
    EXPECT_FALSE(read.loop_dc.has_value());
    // The owner's comments are still there.
    EXPECT_NE(text.find("# BEFORE CONNECTING"), std::string::npos);
}

TEST(RigWriterTest, AnUnreadableTextOrAReadOnlyFileChangesNothing) {
    const auto file = std::filesystem::temp_directory_path() / "coldpin-rig-writer.toml";
    signal::write_text_file(file, rig_text);
    EXPECT_THROW(replace_rig_file(file, "schema = "), UsageError);
    EXPECT_EQ(signal::read_text_file(file), rig_text);
    std::filesystem::permissions(file, std::filesystem::perms::owner_read);
    EXPECT_THROW(replace_rig_file(file, rig_text + "\n"), UsageError);
    EXPECT_EQ(signal::read_text_file(file), rig_text);
    std::filesystem::permissions(file, std::filesystem::perms::owner_all);
    std::filesystem::remove(file);
    EXPECT_THROW(require_writable(file), UsageError);
}

TEST(FixtureFileTest, ShippedFixturesAreReadAndRefusalsNameThePlace) {
    int count = 0;
    for (const auto& entry :
         std::filesystem::directory_iterator(std::string(COLDPIN_SOURCE_DIR) + "/profiles/fixtures")) {
        EXPECT_NO_THROW(read_fixture(entry.path())) << entry.path();
        ++count;
    }
    EXPECT_GE(count, 3);
    const std::string text = signal::read_text_file(std::string(COLDPIN_SOURCE_DIR) +
                                                    "/profiles/fixtures/injection-head-40db.toml");
    const auto said = [&](const std::string& from, const std::string& to) -> std::string {
        std::string changed = text;
        changed.replace(changed.find(from), from.size(), to);
        try {
            fixture_from_text(changed, "f.toml");
        } catch (const UsageError& error) {
            return error.what();
        }
        return "nothing";
    };
    EXPECT_NE(said("series_ohms = 7500", "series_ohms = 0").find("in [pad] series_ohms"), std::string::npos);
    EXPECT_NE(said("series_ohms = 7500", "series_ohms = -7500").find("series_ohms"), std::string::npos);
    EXPECT_NE(said("series_ohms", "serie_ohms").find("did you mean"), std::string::npos);
    EXPECT_NE(said("input_ohms = 2000", "input_ohms = 9000").find("twice leg_to_shield_ohms"),
              std::string::npos);
    EXPECT_NE(said("\"driven-centre\"", "\"H\"").find("floating"), std::string::npos);
}

}  // namespace
}  // namespace coldpin::profile
