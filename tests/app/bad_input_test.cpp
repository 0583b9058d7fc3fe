// Everything a user can get wrong: the message names what is wrong, the status says whose fault it is, and
// nothing half-written stays under a final name.
#include <cmath>
#include <fstream>
#include <limits>

#include <gmock/gmock.h>
#include <gtest/gtest.h>

#include "coldpin/signal/recording.h"
#include "coldpin/signal/wav.h"

#include "program.h"

namespace coldpin::tests {
namespace {

using testing::HasSubstr;
using testing::Not;

const std::string profiles = std::string(COLDPIN_SOURCE_DIR) + "/profiles/";

class BadInputTest : public testing::Test {
  protected:
    TemporaryFolder folder;

    std::filesystem::path file(const std::string& name) const { return folder.path() / name; }
    void write(const std::string& name, const std::string& text) const {
        std::ofstream(file(name), std::ios::binary) << text;
    }

    void write_tone(const std::string& name, double level, double length_s = 1.0, double rate_hz = 48000.0,
                    double ceiling = 10.0) const {
        signal::Recording recording;
        recording.rate_hz = rate_hz;
        recording.channels.emplace_back();
        for (int n = 0; n < static_cast<int>(length_s * rate_hz); ++n)
            recording.channels[0].push_back(
                std::fmin(ceiling, std::fmax(-ceiling, level * std::sin(2.0 * M_PI * 997.0 * n / rate_hz))));
        signal::write_wav(file(name), recording);
    }

    // Never more than two lines, and never a number that is none.
    static void expect_short_and_clear(const Outcome& outcome) {
        EXPECT_LE(std::count(outcome.err.begin(), outcome.err.end(), '\n'), 3) << outcome.err;
        EXPECT_THAT(outcome.err, testing::StartsWith("coldpin: "));
        EXPECT_THAT(outcome.out + outcome.err, Not(HasSubstr("nan")));
        EXPECT_THAT(outcome.out, testing::IsEmpty());
    }
    Outcome refused(const std::string& arguments, int status, const std::string& says,
                    const std::string& before = "") const {
        const Outcome outcome = run_coldpin(arguments, folder.path(), before);
        EXPECT_EQ(outcome.status, status) << arguments << "\n" << outcome.out << outcome.err;
        EXPECT_THAT(outcome.err, HasSubstr(says)) << arguments;
        expect_short_and_clear(outcome);
        return outcome;
    }
};

const std::string gain_flags = " --frequency 997 --drive-dbu -40 --input-full-scale-dbu 18";

TEST_F(BadInputTest, AMissingFileIsNamed) {
    refused("analyse noise nowhere.wav", 2, "nowhere.wav");
}

TEST_F(BadInputTest, AnEmptyFileIsNamed) {
    write("empty.wav", "");
    refused("analyse noise empty.wav", 2, "empty.wav");
}

TEST_F(BadInputTest, ATextFileIsNoRecording) {
    write("letter.wav", "Dear bench,\nthis is no sound.\n");
    refused("analyse noise letter.wav", 2, "letter.wav");
}

TEST_F(BadInputTest, ATruncatedRecordingIsRefused) {
    write_tone("whole.wav", 0.1);
    std::ifstream in(file("whole.wav"), std::ios::binary);
    std::string bytes((std::istreambuf_iterator<char>(in)), {});
    write("cut.wav", bytes.substr(0, bytes.size() / 2));
    refused("analyse noise cut.wav", 2, "cut.wav");
}

TEST_F(BadInputTest, ARecordingWithNotANumberIsRefused) {
    // Written by hand: write_wav() itself would refuse it.
    write_tone("nan.wav", 0.1);
    std::fstream bytes(file("nan.wav"), std::ios::in | std::ios::out | std::ios::binary);
    const float bad = std::numeric_limits<float>::quiet_NaN();
    bytes.seekp(-400, std::ios::end);
    bytes.write(reinterpret_cast<const char*>(&bad), sizeof bad);
    bytes.close();
    const Outcome outcome = run_coldpin("analyse noise nan.wav", folder.path());
    EXPECT_EQ(outcome.status, 2) << outcome.err;
    EXPECT_THAT(outcome.err, HasSubstr("nan.wav"));
    EXPECT_THAT(outcome.out, testing::IsEmpty());
}

TEST_F(BadInputTest, GainOfASilentRecordingIsRefused) {
    write_tone("silent.wav", 0.0);
    refused("analyse gain silent.wav" + gain_flags, 3, "silent");
    refused("analyse noise silent.wav", 3, "silent");
    refused("analyse hum silent.wav", 3, "silent");
}

TEST_F(BadInputTest, GainOfAClippedRecordingIsRefused) {
    write_tone("clipped.wav", 1.4, 1.0, 48000.0, 1.0);
    refused("analyse gain clipped.wav" + gain_flags, 3, "clip");
}

TEST_F(BadInputTest, ATooShortRecordingIsRefused) {
    write_tone("short.wav", 0.1, 0.01);
    refused("analyse gain short.wav" + gain_flags, 2, "short");
    refused("analyse noise short.wav", 2, "short");
}

TEST_F(BadInputTest, AStimulusOfAnotherRateIsRefused) {
    ASSERT_EQ(run_coldpin(
                  "stimulus sweep --from 20 --to 20000 --seconds 1 --level-dbfs -12 --rate 44100 --out s.wav",
                  folder.path())
                  .status,
              0);
    write_tone("rec.wav", 0.1);
    const Outcome outcome = refused("analyse response rec.wav --stimulus s.wav", 2, "44100");
    EXPECT_THAT(outcome.err, HasSubstr("48000"));
}

TEST_F(BadInputTest, AChannelThatDoesNotExistIsRefused) {
    write_tone("mono.wav", 0.1);
    refused("analyse noise mono.wav --channel 3", 2, "3");
    refused("analyse noise mono.wav --channel 0", 2, "0");
    refused("analyse noise mono.wav --channel -1", 2, "-1");
}

TEST_F(BadInputTest, GainWithoutVoltsIsRefused) {
    write_tone("tone.wav", 0.1);
    refused("analyse gain tone.wav --frequency 997 --drive-dbu -40", 2, "--input-full-scale-dbu");
    refused("analyse gain tone.wav --frequency 997 --input-full-scale-dbu 18", 2, "--drive-dbu");
}

TEST_F(BadInputTest, ABandUpsideDownIsRefused) {
    write_tone("tone.wav", 0.1);
    refused("analyse noise tone.wav --band 20000:20", 2, "--band");
    refused("analyse noise tone.wav --band twenty", 2, "--band");
    refused("analyse noise tone.wav --band 20:30000", 2, "24000");
}

TEST_F(BadInputTest, AnUnknownKindNamesTheNearest) {
    write_tone("tone.wav", 0.1);
    refused("analyse nois tone.wav", 2, "noise");
}

TEST_F(BadInputTest, NoiseBelowThatOfItsSourceIsRefusedWithTheLikelyCause) {
    signal::Recording recording;
    recording.rate_hz = 48000.0;
    recording.channels.emplace_back();
    unsigned state = 1;
    for (int n = 0; n < 96000; ++n) {
        state = state * 1664525U + 1013904223U;
        recording.channels[0].push_back(1e-6 * (static_cast<double>(state) / 2147483648.0 - 1.0));
    }
    signal::write_wav(file("quiet.wav"), recording);
    refused("analyse noise quiet.wav --input-full-scale-dbu 18 --gain-db 60 --source-ohms 150", 3, "thermal");
}

TEST_F(BadInputTest, ABrokenProfileNamesFileAndLine) {
    write("broken.toml", "schema = \"coldpin-device/1\"\nname = \"x\nno end\n");
    refused("check --rig simulated --device broken.toml", 2, "broken.toml:2");
}

TEST_F(BadInputTest, AMissingProfileAndAMissingRigAreNamed) {
    refused("check --rig simulated --device nowhere.toml", 2, "nowhere.toml");
    refused("check --rig nowhere.toml --device " + profiles + "devices/fennmark-pl2.toml", 2, "nowhere.toml");
}

TEST_F(BadInputTest, AnUnwritableFolderIsNamedAndNothingIsLeft) {
    write("runs", "a file where a folder should be");
    refused("check --rig simulated --device " + profiles + "devices/fennmark-pl2.toml", 2, "runs");
    refused("stimulus tone --frequency 997 --seconds 1 --level-dbfs -20 --out no/such/folder/tone.wav", 2,
            "no/such/folder");
}

TEST_F(BadInputTest, AFullDiskLeavesNothingUnderAFinalName) {
    // A file size limit stands for a full disk: writing fails half-way.
    const Outcome outcome =
        run_coldpin("stimulus tone --frequency 997 --seconds 5 --level-dbfs -20 --out tone.wav",
                    folder.path(), "trap '' XFSZ; ulimit -f 100;");
    EXPECT_EQ(outcome.status, 2) << outcome.err;
    EXPECT_TRUE(std::filesystem::is_empty(folder.path()));

    const Outcome check =
        run_coldpin("check --rig simulated --device " + profiles + "devices/fennmark-pl2.toml --runs runs",
                    folder.path(), "trap '' XFSZ; ulimit -f 100;");
    EXPECT_EQ(check.status, 2) << check.err;
    for (const auto& entry : std::filesystem::recursive_directory_iterator(folder.path()))
        EXPECT_THAT(entry.path().filename().string(), Not(HasSubstr("run.json"))) << entry.path();
}

TEST_F(BadInputTest, AFullStandardOutputIsNoSuccess) {
    write_tone("tone.wav", 0.1);
    const Outcome outcome = run_coldpin("analyse noise tone.wav --json > /dev/full", folder.path());
    EXPECT_EQ(outcome.status, 2) << outcome.err;
    EXPECT_THAT(outcome.err, HasSubstr("standard output"));
}

TEST_F(BadInputTest, UnknownWordsAndMissingOnesAreUsageErrors) {
    EXPECT_EQ(run_coldpin("", folder.path()).status, 2);
    EXPECT_EQ(run_coldpin("chek", folder.path()).status, 2);
    EXPECT_EQ(run_coldpin("check --rig simulated", folder.path()).status, 2);
    EXPECT_EQ(run_coldpin("check --rig simulated --devcie x", folder.path()).status, 2);
    EXPECT_EQ(
        run_coldpin("stimulus tone --frequency lots --seconds 1 --level-dbfs -20 --out t.wav", folder.path())
            .status,
        2);
    EXPECT_EQ(
        run_coldpin("stimulus tone --frequency 30000 --seconds 1 --level-dbfs -20 --out t.wav", folder.path())
            .status,
        2);
    EXPECT_EQ(
        run_coldpin("stimulus tone --frequency 997 --seconds 1 --level-dbfs 3 --out t.wav", folder.path())
            .status,
        2);
    EXPECT_EQ(
        run_coldpin("stimulus tone --frequency nan --seconds 1 --level-dbfs -3 --out t.wav", folder.path())
            .status,
        2);
    EXPECT_EQ(
        run_coldpin("stimulus tone --frequency 997 --seconds 1e9 --level-dbfs -3 --out t.wav", folder.path())
            .status,
        2);
    EXPECT_TRUE(std::filesystem::is_empty(folder.path()));
}

TEST_F(BadInputTest, CtrlCInTheMiddleEndsSoonAndKeepsNothing) {
    const Outcome outcome =
        run_coldpin("check --rig simulated --real-time --device " + profiles + "devices/fennmark-pl2.toml",
                    folder.path(), "timeout -s INT 1.5");
    EXPECT_LT(outcome.wall_s, 4.0);
    EXPECT_FALSE(std::filesystem::exists(file("runs")) && !std::filesystem::is_empty(file("runs")));
    EXPECT_THAT(outcome.err, HasSubstr("interrupted"));
}

}  // namespace
}  // namespace coldpin::tests
