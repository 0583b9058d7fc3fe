// The main job through the real program: check on the simulated rig, and everything again from its
// recordings.
#include <fstream>

#include <gmock/gmock.h>
#include <gtest/gtest.h>
#include <nlohmann/json.hpp>

#include "program.h"

namespace coldpin::tests {
namespace {

using nlohmann::json;
using testing::HasSubstr;

const std::string profiles = std::string(COLDPIN_SOURCE_DIR) + "/profiles/";

std::filesystem::path only_run_in(const std::filesystem::path& runs) {
    std::vector<std::filesystem::path> found;
    for (const auto& entry : std::filesystem::directory_iterator(runs)) found.push_back(entry.path());
    EXPECT_EQ(found.size(), 1U);
    return found.at(0);
}

json read_json(const std::filesystem::path& file) {
    std::ifstream in(file);
    return json::parse(in);
}

TEST(CheckCommandTest, ShippedProfilesPassOnTheSimulatedRigInUnderThreeSeconds) {
    for (const auto& entry : std::filesystem::directory_iterator(profiles + "devices")) {
        TemporaryFolder folder;
        const Outcome outcome = run_coldpin(
            "check --rig simulated --serial 0042 --device " + entry.path().string(), folder.path());
        EXPECT_EQ(outcome.status, 0) << entry.path() << "\n" << outcome.out << outcome.err;
        EXPECT_THAT(outcome.out, HasSubstr("PASS"));
        const auto run = only_run_in(folder.path() / "runs");
        EXPECT_TRUE(std::filesystem::exists(run / "report.html"));
        EXPECT_EQ(read_json(run / "run.json").at("schema"), "coldpin-run/1");
    }
}

TEST(CheckCommandTest, AnOpenColdLegFails) {
    TemporaryFolder folder;
    const Outcome outcome =
        run_coldpin("check --rig " + profiles + "rigs/simulated-cold-leg-open.toml --device " + profiles +
                        "devices/fennmark-pl2.toml --serial bad",
                    folder.path());
    EXPECT_EQ(outcome.status, 1) << outcome.out << outcome.err;
    EXPECT_THAT(outcome.out, HasSubstr("FAIL"));
}

TEST(CheckCommandTest, JsonIsOneDocumentAndNothingElse) {
    TemporaryFolder folder;
    const Outcome outcome = run_coldpin(
        "check --json --rig simulated --device " + profiles + "devices/fennmark-pl2.toml", folder.path());
    ASSERT_EQ(outcome.status, 0) << outcome.err;
    EXPECT_EQ(json::parse(outcome.out).at("schema"), "coldpin-run/1");
}

TEST(CheckCommandTest, ARunAnalysedAgainGivesTheSameNumbersBitForBit) {
    TemporaryFolder folder;
    ASSERT_EQ(
        run_coldpin("check --rig simulated --device " + profiles + "devices/fennmark-pl2.toml", folder.path())
            .status,
        0);
    const auto run = only_run_in(folder.path() / "runs");
    const Outcome again = run_coldpin("analyse --json '" + run.string() + "'", folder.path());
    ASSERT_EQ(again.status, 0) << again.err;
    EXPECT_EQ(json::parse(again.out), read_json(run / "run.json"));
    EXPECT_THAT(again.err, HasSubstr("every figure is the one the run holds"));
}

// Each recording of a run, analysed alone with only its description, gives the run's own figures.
TEST(CheckCommandTest, LooseRecordingsGiveTheRunsFigures) {
    TemporaryFolder folder;
    ASSERT_EQ(
        run_coldpin("check --rig simulated --device " + profiles + "devices/fennmark-pl2.toml", folder.path())
            .status,
        0);
    const auto run = only_run_in(folder.path() / "runs");
    const json kept = read_json(run / "run.json");
    int compared = 0;
    for (const auto& step : kept.at("steps")) {
        const std::string kind = step.at("measure");
        std::vector<std::string> files;
        for (const auto& name : step.at("captures"))
            files.push_back((run / "recordings" / (name.get<std::string>() + ".wav")).string());
        const std::string words =
            kind == "cmrr" ? "--differential '" + files.at(0) + "' --common-mode '" + files.at(1) + "'"
                           : "'" + files.at(0) + "'";
        const Outcome outcome = run_coldpin("analyse " + kind + " " + words + " --json", folder.path());
        ASSERT_EQ(outcome.status, 0) << kind << outcome.err;
        EXPECT_EQ(json::parse(outcome.out), step.at("findings")) << kind;
        ++compared;
    }
    EXPECT_GE(compared, 5);
}

TEST(CheckCommandTest, MeasureGivesOneFinding) {
    TemporaryFolder folder;
    for (const std::string kind :
         {"gain", "response", "noise", "hum", "cmrr", "distortion", "polarity", "latency"}) {
        const Outcome outcome =
            run_coldpin("measure " + kind + " --rig simulated --json --nominal-gain-db 40", folder.path());
        ASSERT_EQ(outcome.status, 0) << kind << outcome.err;
        const json findings = json::parse(outcome.out);
        EXPECT_EQ(findings.at("schema"), "coldpin-findings/1");
        EXPECT_EQ(findings.at("kind"), kind);
        EXPECT_FALSE(findings.at("figures").empty()) << kind;
    }
}

TEST(CheckCommandTest, EveryCommandHasHelpWithAnExample) {
    TemporaryFolder folder;
    for (const std::string command :
         {"", "check", "measure", "analyse", "capture", "stimulus", "stimulus tone", "devices", "report"}) {
        const Outcome outcome = run_coldpin(command + " --help", folder.path());
        EXPECT_EQ(outcome.status, 0) << command;
        EXPECT_THAT(outcome.out, HasSubstr("Example")) << command;
    }
    EXPECT_THAT(run_coldpin("--version", folder.path()).out,
                testing::MatchesRegex("coldpin [0-9]+\\.[0-9]+\\.[0-9]+\n"));
}

}  // namespace
}  // namespace coldpin::tests
