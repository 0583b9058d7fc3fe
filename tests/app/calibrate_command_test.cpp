// calibrate, fixture and hum-search through the real program: what they write, and that nothing is lost when
// they cannot.
#include <filesystem>
#include <fstream>

#include <gmock/gmock.h>
#include <gtest/gtest.h>
#include <nlohmann/json.hpp>

#include "coldpin/profile/rig_file.h"
#include "coldpin/signal/text_file.h"

#include "program.h"

namespace coldpin::tests {
namespace {

using testing::HasSubstr;

const std::string profiles = std::string(COLDPIN_SOURCE_DIR) + "/profiles/";

class CalibrateCommandTest : public testing::Test {
  protected:
    void SetUp() override {
        std::filesystem::copy(profiles + "rigs/simulated.toml", rig);
        before = signal::read_text_file(rig);
    }
    std::string now() const { return signal::read_text_file(rig); }
    TemporaryFolder folder;
    std::filesystem::path rig = folder.path() / "rig.toml";
    std::string before;
};

TEST_F(CalibrateCommandTest, WritesTheRigAndKeepsTheOneBefore) {
    const auto outcome = run_coldpin(
        "calibrate --rig rig.toml --yes --reading '3.083 V' --knobs 'all at noon' --json", folder.path());
    ASSERT_EQ(outcome.status, 0) << outcome.err;
    const auto json = nlohmann::json::parse(outcome.out);
    EXPECT_EQ(json.at("kind"), "calibration");
    const auto setup = profile::read_rig(rig.string()).setup;
    EXPECT_NEAR(setup.calibration->output_full_scale_dbu, 18.0, 0.005);
    EXPECT_NEAR(setup.calibration->input_full_scale_dbu, 18.0, 0.01);
    EXPECT_EQ(setup.calibration->knobs, "all at noon");
    EXPECT_THAT(now(), HasSubstr("# Output 1 feeds the pad"));  // the owner's words stay
    const auto history = run_coldpin("calibrate --rig rig.toml --history", folder.path());
    EXPECT_EQ(history.status, 0);
    EXPECT_THAT(history.out, HasSubstr("by hand"));
    EXPECT_THAT(history.out, HasSubstr("no change beyond the uncertainty"));
    // The calibrated rig measures as before.
    const auto check =
        run_coldpin("check --rig rig.toml --device " + profiles + "devices/fennmark-pl2.toml", folder.path());
    EXPECT_EQ(check.status, 0) << check.out << check.err;
}

TEST_F(CalibrateCommandTest, WhatIsRefusedLeavesTheRigAsItWas) {
    const std::pair<const char*, const char*> refused[] = {
        {"--yes --reading '40 V'", "no line output"},
        {"--yes --reading '3.1'", "without its unit"},
        {"--yes --reading '1.2 A'", "'A' is no unit"},
        {"--yes --reading '0.4 mV'", "in front of the pad"},
        {"--yes", "needs an answer"},
        {"", "nobody answered"},
        {"--yes --reading '3 V' --level-dbfs 3", "expected -60 to 0"},
        {"--yes --reading '3 V' --meter-percent -1", "--meter-percent"},
    };
    for (const auto& [arguments, words] : refused) {
        const auto outcome = run_coldpin(std::string("calibrate --rig rig.toml ") + arguments, folder.path());
        EXPECT_EQ(outcome.status, 2) << arguments << outcome.err;
        EXPECT_THAT(outcome.err, HasSubstr(words)) << arguments;
        EXPECT_EQ(now(), before) << arguments;
        EXPECT_FALSE(std::filesystem::exists(folder.path() / "rig.calibrations.jsonl")) << arguments;
    }
}

TEST_F(CalibrateCommandTest, ADishonestPathIsExitThreeAndWritesNothing) {
    std::ofstream(rig, std::ios::app) << "\n[simulated.faults]\nresample_to_hz = 44100\n";
    const std::string faulty = now();
    const auto outcome = run_coldpin("calibrate --rig rig.toml --yes --reading '3.083 V'", folder.path());
    EXPECT_EQ(outcome.status, 3);
    EXPECT_THAT(outcome.err, HasSubstr("44.1 kHz inside"));
    EXPECT_THAT(outcome.err, HasSubstr("stays valid"));
    EXPECT_EQ(now(), faulty);
}

TEST_F(CalibrateCommandTest, AReadOnlyRigIsSaidBeforeAnyWork) {
    std::filesystem::permissions(rig, std::filesystem::perms::owner_read);
    const auto outcome = run_coldpin("calibrate --rig rig.toml --yes --reading '3.083 V'", folder.path());
    EXPECT_EQ(outcome.status, 2);
    EXPECT_THAT(outcome.err, HasSubstr("read-only"));
    std::filesystem::permissions(rig, std::filesystem::perms::owner_all);
    EXPECT_EQ(now(), before);
    EXPECT_EQ(run_coldpin("calibrate --rig missing.toml --yes --reading '3 V'", folder.path()).status, 2);
}

TEST_F(CalibrateCommandTest, AnInterruptedCalibrationLeavesTheOldOne) {
    const auto outcome = run_coldpin("calibrate --rig rig.toml --real-time --yes --reading '3.083 V'",
                                     folder.path(), "timeout -s INT 1.5");
    EXPECT_NE(outcome.status, 0);  // `timeout` puts its own in place of the program's
    EXPECT_THAT(outcome.err, HasSubstr("interrupted"));
    EXPECT_EQ(now(), before);
}

TEST_F(CalibrateCommandTest, TwoFixturesOfOneNameAreRefusedWithPlace) {
    std::ofstream(rig, std::ios::app) << "\n[fixtures.head]\ndifferential_loss_db = 20\n";
    const auto outcome = run_coldpin("calibrate --rig rig.toml --yes --reading '3.083 V'", folder.path());
    EXPECT_EQ(outcome.status, 2);
    EXPECT_THAT(outcome.err, HasSubstr("rig.toml:"));
    EXPECT_THAT(outcome.err, HasSubstr("fixtures.head"));
}

TEST_F(CalibrateCommandTest, AFixtureIsComputedAndWritten) {
    const std::string head = profiles + "fixtures/injection-head-40db.toml";
    const auto shown = run_coldpin("fixture " + head + " --json", folder.path());
    ASSERT_EQ(shown.status, 0) << shown.err;
    EXPECT_EQ(nlohmann::json::parse(shown.out).at("kind"), "fixture");
    const auto written = run_coldpin("fixture " + head + " --rig rig.toml", folder.path());
    ASSERT_EQ(written.status, 0) << written.err;
    const auto fixture = profile::read_rig(rig.string()).setup.fixture;
    EXPECT_NEAR(fixture.differential_loss_db, 40.71, 0.01);
    EXPECT_NEAR(fixture.common_mode_loss_db, 6.65, 0.01);
    EXPECT_TRUE(fixture.rejection_limit_db.has_value());
    const auto pad =
        run_coldpin("fixture --loss-db 40 --source-ohms 150 --input-ohms 2000 --json", folder.path());
    ASSERT_EQ(pad.status, 0);
    EXPECT_LT(std::abs(nlohmann::json::parse(pad.out).at("loss_error_db").get<double>()), 0.1);
    for (const char* arguments : {"fixture", "fixture missing.toml", "fixture --loss-db 2",
                                  "fixture --loss-db 40 --series E7", "fixture --loss-db 40 --source-ohms 0"})
        EXPECT_EQ(run_coldpin(arguments, folder.path()).status, 2) << arguments;
    std::string zero = signal::read_text_file(head);
    zero.replace(zero.find("series_ohms = 7500"), 18, "series_ohms = 0   ");
    signal::write_text_file(folder.path() / "zero.toml", zero);
    const auto refused = run_coldpin("fixture zero.toml", folder.path());
    EXPECT_EQ(refused.status, 2);
    EXPECT_THAT(refused.err, HasSubstr("[pad] series_ohms"));
}

// A floating shunt on a single-ended output would spoil the gain of a unit of ordinary rejection: not
// written.
TEST_F(CalibrateCommandTest, AFixtureThatSpoilsTheGainIsNotWritten) {
    std::string pad = signal::read_text_file(profiles + "fixtures/split-pad-40db.toml");
    pad.replace(pad.find("\"split\""), 7, "\"floating\"");
    signal::write_text_file(folder.path() / "pad.toml", pad);
    const auto outcome = run_coldpin("fixture pad.toml --rig rig.toml --unit-rejection-db 40", folder.path());
    EXPECT_EQ(outcome.status, 2);
    EXPECT_THAT(outcome.err, HasSubstr("split shunt"));
    EXPECT_EQ(now(), before);
}

TEST_F(CalibrateCommandTest, HumIsSearchedFor) {
    const auto outcome =
        run_coldpin("hum-search --json --rig " + profiles + "rigs/simulated-noisy-interface.toml --device " +
                        profiles + "devices/fennmark-pl2.toml",
                    folder.path());
    ASSERT_EQ(outcome.status, 0) << outcome.err;
    const auto json = nlohmann::json::parse(outcome.out);
    EXPECT_EQ(json.at("kind"), "hum_search");
    EXPECT_THAT(json.at("cautions").at(0).get<std::string>(), HasSubstr("the loop through shields"));
}

}  // namespace
}  // namespace coldpin::tests
