#include "coldpin/records/run_folder.h"

#include <csignal>
#include <fstream>

#include <gmock/gmock.h>
#include <gtest/gtest.h>
#include <nlohmann/json.hpp>
#include <sys/resource.h>

#include "coldpin/check/perform.h"
#include "coldpin/signal/text_file.h"
#include "coldpin/signal/wav.h"
#include "coldpin/units/error.h"

namespace coldpin::records {
namespace {

namespace fs = std::filesystem;
using testing::HasSubstr;

class SilentBench : public check::Bench {
    void ask(const std::string&) override {}
    void progress(const std::string&, std::size_t, std::size_t) override {}
};

const check::Run& example() {
    static const check::Run run = [] {
        const auto device = profile::read_device_profile(std::string(COLDPIN_SOURCE_DIR) +
                                                         "/profiles/devices/fennmark-pl2.toml");
        auto rig = profile::read_rig("simulated");
        rig.setup.simulated.preamp = device.simulated;
        rig::Session session(rig.setup, rig::open_backend(rig.setup));
        SilentBench bench;
        return check::perform(device, rig, session, bench,
                              {"0.1.0", "2026-05-04T09:03:07Z", "A/42 \"x\"", "Ö", "first try", {"bench 2"}});
    }();
    return run;
}

class RunFolderTest : public testing::Test {
  protected:
    RunFolderTest()
        : parent(fs::temp_directory_path() /
                 ("coldpin-runs-" +
                  std::string(testing::UnitTest::GetInstance()->current_test_info()->name()))) {
        fs::remove_all(parent);
    }
    ~RunFolderTest() override { fs::remove_all(parent); }
    fs::path parent;

    static std::string refusal(const fs::path& folder) {
        try {
            load_run(folder);
        } catch (const UsageError& error) {
            return error.what();
        }
        return "";
    }
};

TEST_F(RunFolderTest, ARunComesBackWholeAndGivesTheSameNumbersAgain) {
    const auto folder = save_run(example(), parent, {{"report.html", "<p>"}});
    EXPECT_EQ(folder.filename(), "2026-05-04T090307Z_A_42__x_");
    EXPECT_EQ(signal::read_text_file(folder / "report.html"), "<p>");
    check::Run run = load_run(folder);
    EXPECT_EQ(run_to_json_text(run), run_to_json_text(example()));
    ASSERT_EQ(run.captures.size(), example().captures.size());
    for (std::size_t i = 0; i < run.captures.size(); ++i) {
        EXPECT_EQ(run.captures[i].take.recording.channels, example().captures[i].take.recording.channels);
        EXPECT_EQ(run.captures[i].take.description, example().captures[i].take.description);
    }
    check::analyse_again(run);
    EXPECT_EQ(run_to_json_text(run), run_to_json_text(example()));
}

TEST_F(RunFolderTest, ASecondRunOfTheSameSecondGetsANameOfItsOwn) {
    const auto first = save_run(example(), parent, {}), second = save_run(example(), parent, {});
    EXPECT_NE(first, second);
    EXPECT_EQ(refusal(first), "");
    EXPECT_EQ(refusal(second), "");
}

TEST_F(RunFolderTest, WhatIsNoWholeRunIsRefusedInWords) {
    EXPECT_THAT(refusal(parent / "nothing"), HasSubstr("no run folder"));
    const auto folder = save_run(example(), parent, {});
    fs::path unfinished = folder;
    unfinished += ".unfinished";
    fs::copy(folder, unfinished, fs::copy_options::recursive);
    EXPECT_THAT(refusal(unfinished), HasSubstr("never finished"));

    const fs::path wav = folder / "recordings" / (example().captures[0].take.name + ".wav");
    auto recording = signal::read_wav(wav);
    recording.channels[0].resize(1000);
    recording.channels[1].resize(1000);
    signal::write_wav(wav, recording);
    EXPECT_THAT(refusal(folder), HasSubstr("was changed"));
    fs::remove(wav);
    EXPECT_THAT(refusal(folder), HasSubstr(wav.filename().string()));
    const std::string json = signal::read_text_file(folder / "run.json");
    signal::write_text_file(folder / "run.json", json.substr(0, json.size() / 2));
    EXPECT_THAT(refusal(folder), HasSubstr("run.json"));
    fs::remove(folder / "run.json");
    EXPECT_THAT(refusal(folder), HasSubstr("holds no run.json"));
}

TEST_F(RunFolderTest, AFullDiskLeavesNothing) {
    std::signal(SIGXFSZ, SIG_IGN);
    rlimit before{};
    getrlimit(RLIMIT_FSIZE, &before);
    rlimit small = before;
    small.rlim_cur = 200000;
    setrlimit(RLIMIT_FSIZE, &small);
    EXPECT_THROW(save_run(example(), parent, {}), UsageError);
    setrlimit(RLIMIT_FSIZE, &before);
    EXPECT_TRUE(fs::is_empty(parent));
}

TEST_F(RunFolderTest, AFileInTheFoldersPlaceIsNamed) {
    signal::write_text_file(parent, "in the way");
    EXPECT_THROW(save_run(example(), parent, {}), UsageError);
}

// Cut anywhere, or with a byte changed: refused in words or read, never a crash.
TEST_F(RunFolderTest, DamagedRunFilesNeverCrash) {
    const auto folder = save_run(example(), parent, {});
    const std::string json = signal::read_text_file(folder / "run.json");
    unsigned random = 7;
    for (int round = 0; round < 60; ++round) {
        random = random * 1664525U + 1013904223U;
        std::string damaged = json;
        damaged[random % damaged.size()] = static_cast<char>(random >> 20U);
        if (round % 3 == 0) damaged.resize(random % damaged.size());
        signal::write_text_file(folder / "run.json", damaged);
        try {
            load_run(folder);
        } catch (const Error&) {
        }
    }
}

}  // namespace
}  // namespace coldpin::records
