// The real PortAudio path against the virtual sound card. Each case runs in a card of its own (CMakeLists.txt
// says with which preamp), so ask for one case at a time.
#include <chrono>
#include <cmath>
#include <cstdlib>
#include <fstream>
#include <thread>

#include <gmock/gmock.h>
#include <gtest/gtest.h>
#include <nlohmann/json.hpp>
#include <signal.h>

#include "coldpin/profile/rig_file.h"
#include "coldpin/rig/devices.h"
#include "coldpin/rig/session.h"
#include "coldpin/units/error.h"

#include "app/program.h"

namespace coldpin::tests {
namespace {

using testing::HasSubstr;

const std::string here = std::string(COLDPIN_SOURCE_DIR) + "/tests/soundcard/";

int process_of(const char* name) {
    const char* text = std::getenv(name);
    EXPECT_NE(text, nullptr) << "run me through virtual_sound_card.sh";
    return text != nullptr ? std::atoi(text) : 0;
}

profile::RigFile card() {
    return profile::read_rig(here + "rig.toml");
}

rig::Capture capture_tone(double length_s = 1.0) {
    const auto file = card();
    rig::Session session(file.setup, rig::open_backend(file.setup));
    rig::CaptureRequest request;
    request.label = "tone";
    request.stimulus.kind = signal::Tone{997.0};
    request.stimulus.length_s = length_s;
    request.drive_dbu = -36.0;
    request.wiring = session.wiring_for(request.feed, "", "");
    if (!session.prepare(request.wiring)) session.confirm(request.wiring);
    return session.capture(request);
}

struct Clock {
    std::chrono::steady_clock::time_point begun = std::chrono::steady_clock::now();
    double s() const {
        return std::chrono::duration<double>(std::chrono::steady_clock::now() - begun).count();
    }
};

TEST(SoundCardTest, TheDeviceIsListedInWords) {
    const auto devices = rig::list_devices();
    ASSERT_EQ(devices.size(), 1U);
    EXPECT_EQ(devices[0].name, "preamp");
    EXPECT_EQ(devices[0].input_channels, 2);
    EXPECT_EQ(devices[0].output_channels, 2);
    EXPECT_TRUE(devices[0].can_serve);
    EXPECT_EQ(devices[0].common_rates_hz, std::vector<double>{48000.0});
    TemporaryFolder folder;
    const Outcome outcome = run_coldpin("devices", folder.path());
    EXPECT_EQ(outcome.status, 0);
    EXPECT_THAT(outcome.out,
                HasSubstr("can serve for whole checks without moving a cable, with a reference input"));
    EXPECT_THAT(outcome.err, testing::IsEmpty());
}

// Sample n is a number that no other sample is: what comes back tells where each came from.
TEST(SoundCardTest, SamplesComeBackBitForBitWithOneDelay) {
    const auto file = card();
    const auto backend = rig::open_backend(file.setup);
    rig::TakeRequest request;
    request.input_channels = 2;
    request.play.assign(2, std::vector<float>(96000));
    for (std::size_t n = 0; n < 96000; ++n)
        for (std::size_t c = 0; c < 2; ++c)
            request.play[c][n] =
                static_cast<float>((n * 2654435761U + c * 977U) % 16777213U + 1U) / 16777216.0F - 0.5F;
    const rig::Take take = backend->play_and_record(request, nullptr);
    for (std::size_t c = 0; c < 2; ++c) {
        const auto& recorded = take.recorded.at(c);
        ASSERT_EQ(recorded.size(), 96000U);
        const auto first = std::find(recorded.begin(), recorded.end(), request.play[c][0]);
        ASSERT_NE(first, recorded.end());
        const auto delay = static_cast<std::size_t>(first - recorded.begin());
        EXPECT_LT(delay, 9000U);
        for (std::size_t n = delay; n < recorded.size(); ++n)
            ASSERT_EQ(recorded[n], request.play[c][n - delay]) << n;
    }
}

TEST(SoundCardTest, WhatTheDeviceCannotDoIsSaidInWords) {
    auto file = card();
    file.setup.audio.sample_rate_hz = 44100.0;
    const auto message_of = [](const rig::Setup& setup) -> std::string {
        try {
            rig::TakeRequest request;
            request.rate_hz = setup.audio.sample_rate_hz;
            request.play.assign(static_cast<std::size_t>(setup.routing.differential_output),
                                std::vector<float>(1000));
            rig::open_backend(setup)->play_and_record(request, nullptr);
        } catch (const Error& error) {
            return error.what();
        }
        return "";
    };
    EXPECT_THAT(message_of(file.setup), testing::AllOf(HasSubstr("44100"), HasSubstr("sample_rate_hz")));
    file = card();
    file.setup.routing.differential_output = 5;
    EXPECT_THAT(message_of(file.setup), HasSubstr("5 output(s)"));
    file = card();
    file.setup.audio.output_device = file.setup.audio.input_device = "preemp";
    EXPECT_THAT(message_of(file.setup), testing::AllOf(HasSubstr("preemp"), HasSubstr("'preamp'")));
}

TEST(SoundCardTest, ACheckAgreesWithTheVirtualPreampsTruth) {
    TemporaryFolder folder;
    const Outcome outcome = run_coldpin(
        "check --yes --json --rig " + here + "rig.toml --device " + here + "preamp.toml --serial v1",
        folder.path());
    ASSERT_EQ(outcome.status, 0) << outcome.out << outcome.err;
    const auto run = nlohmann::json::parse(outcome.out);
    const auto figure = [&](const std::string& quantity) {
        for (const auto& step : run.at("steps"))
            for (const auto& one : step.at("findings").at("figures"))
                if (one.at("quantity") == quantity) return one;
        ADD_FAILURE() << quantity;
        return nlohmann::json();
    };
    // --gain 1.005 --conversion 0.01: 40 dB of pad make it 40.04 dB from the preamp's input; common mode
    // comes through 40 dB down, so rejection is 80 dB.
    EXPECT_NEAR(figure("gain").at("value").get<double>(), 40.0 + 20.0 * std::log10(1.005), 0.003);
    EXPECT_NEAR(figure("common_mode_rejection").at("value").get<double>(), 80.0, 0.02);
    EXPECT_LT(figure("response_deviation").at("value").get<double>(), 0.02);
    EXPECT_EQ(figure("polarity").at("value").get<double>(), 1.0);
    // White noise of 1e-5 RMS over 24 kHz, 20 kHz of it in the band; full scale is +18 dBu.
    EXPECT_NEAR(figure("noise_output").at("value").get<double>(),
                18.0 + 20.0 * std::log10(1e-5 * std::sqrt(2.0 * 19980.0 / 24000.0)), 0.1);
    EXPECT_NEAR(std::remainder(figure("latency").at("value").get<double>(), 1.0), 0.0, 0.05);
}

TEST(SoundCardTest, SevenFramesLostWithoutAFlagAreNoticedAndTakenAgain) {
    const rig::Capture capture = capture_tone();
    EXPECT_EQ(capture.takes, 2);
    EXPECT_THAT(capture.description.remarks, testing::Contains(HasSubstr("take 1 was damaged")));
}

TEST(SoundCardTest, SevenZeroedFramesAreNoticedAndTakenAgain) {
    const rig::Capture capture = capture_tone();
    EXPECT_EQ(capture.takes, 2);
    EXPECT_THAT(capture.description.remarks, testing::Contains(HasSubstr("zeros")));
}

TEST(SoundCardTest, ADeviceThatLeavesIsNoMeasurement) {
    TemporaryFolder folder;
    const Outcome outcome =
        run_coldpin("check --yes --rig " + here + "rig.toml --device " + here + "preamp.toml", folder.path());
    EXPECT_EQ(outcome.status, 3) << outcome.out << outcome.err;
    EXPECT_THAT(outcome.err, testing::StartsWith("virtual preamp"));
    EXPECT_THAT(outcome.err, testing::AnyOf(HasSubstr("zeros"), HasSubstr("no audio"), HasSubstr("stopped"),
                                            HasSubstr("opened")));
    EXPECT_LT(outcome.wall_s, 20.0);
    EXPECT_FALSE(std::filesystem::exists(folder.path() / "runs"));
}

void expect_refused(const char* words) {
    TemporaryFolder folder;
    const Outcome outcome =
        run_coldpin("check --yes --rig " + here + "rig.toml --device " + here + "preamp.toml", folder.path());
    EXPECT_EQ(outcome.status, 3) << outcome.out << outcome.err;
    EXPECT_THAT(outcome.err, HasSubstr(words));
    EXPECT_LT(outcome.wall_s, 5.0);
    EXPECT_FALSE(std::filesystem::exists(folder.path() / "runs"));
}

TEST(SoundCardTest, AMovedKnobIsRefusedBeforeAnythingIsMeasured) {
    expect_refused("a knob was moved");  // 0.2 dB
}
TEST(SoundCardTest, AMonitorMixIsRefusedBeforeAnythingIsMeasured) {
    expect_refused("mixed back into the output");
}
TEST(SoundCardTest, ALimiterIsRefusedBeforeAnythingIsMeasured) {
    expect_refused("depends on the level");
}

// The preamp of gain 0.8 stands for a loop whose input is 1.94 dB less sensitive than the output is strong.
TEST(SoundCardTest, ALoopIsCalibratedByHand) {
    TemporaryFolder folder;
    std::ifstream source(here + "rig.toml");
    std::string rig((std::istreambuf_iterator<char>(source)), {});
    rig.erase(rig.find("common_mode = 2\n"), std::string("common_mode = 2\n").size());
    std::ofstream(folder.path() / "rig.toml") << rig;
    std::ofstream(folder.path() / "answers") << "\n\n\nall at noon\n";
    const Outcome outcome = run_coldpin(
        "calibrate --rig rig.toml --reading '3.083 V' --meter-percent 0.5 "
        "--meter-digits 1 --meter-counts 6000 --json < answers",
        folder.path());
    ASSERT_EQ(outcome.status, 0) << outcome.out << outcome.err;
    const auto calibration = *profile::read_rig((folder.path() / "rig.toml").string()).setup.calibration;
    // 3.083 V at -6 dBFS is 18 dBu at 0 dBFS.
    EXPECT_NEAR(calibration.output_full_scale_dbu, 18.0, 0.005);
    EXPECT_NEAR(calibration.input_full_scale_dbu, 18.0 - 20.0 * std::log10(0.8), 0.01);
    EXPECT_NEAR(*calibration.reference_full_scale_dbu, 18.0, 0.01);
    EXPECT_GT(*calibration.loop_latency_frames, 100.0);
    EXPECT_TRUE(std::filesystem::exists(folder.path() / "rig.calibrations.jsonl"));
}

TEST(SoundCardTest, ANewRigIsMadeFromAnswers) {
    TemporaryFolder folder;
    // Device, output, no common-mode output, input, reference; then pad, loop, knobs.
    std::ofstream(folder.path() / "answers") << "1\n\n0\n1\n2\n\n\nall at noon\n";
    const Outcome outcome =
        run_coldpin("calibrate --rig new.toml --reading '3.083 V' < answers", folder.path());
    ASSERT_EQ(outcome.status, 0) << outcome.out << outcome.err;
    const auto setup = profile::read_rig((folder.path() / "new.toml").string()).setup;
    EXPECT_EQ(setup.audio.output_device, "preamp");
    EXPECT_FALSE(setup.routing.common_mode_output.has_value());
    EXPECT_EQ(setup.routing.reference_input, 2);
    EXPECT_NEAR(setup.calibration->output_full_scale_dbu, 18.0, 0.005);
    EXPECT_EQ(setup.calibration->knobs, "all at noon");
    EXPECT_NEAR(setup.fixture.differential_loss_db, 40.7, 0.1);
    // A wrong answer is refused and leaves nothing.
    std::ofstream(folder.path() / "wrong") << "1\n7\n";
    const Outcome wrong = run_coldpin("calibrate --rig other.toml < wrong", folder.path());
    EXPECT_EQ(wrong.status, 2);
    EXPECT_THAT(wrong.err, HasSubstr("from 1 to 2"));
    EXPECT_FALSE(std::filesystem::exists(folder.path() / "other.toml"));
}

TEST(SoundCardTest, ADeviceThatVanishesWhileCalibratingLeavesTheOldOne) {
    TemporaryFolder folder;
    std::ifstream source(here + "rig.toml");
    std::string rig((std::istreambuf_iterator<char>(source)), {});
    rig.erase(rig.find("common_mode = 2\n"), std::string("common_mode = 2\n").size());
    std::ofstream(folder.path() / "rig.toml") << rig;
    std::ofstream(folder.path() / "answers") << "\n\n\nall at noon\n";
    const Outcome outcome =
        run_coldpin("calibrate --rig rig.toml --reading '3.083 V' < answers", folder.path());
    EXPECT_EQ(outcome.status, 3) << outcome.out << outcome.err;
    EXPECT_LT(outcome.wall_s, 20.0);
    std::ifstream after(folder.path() / "rig.toml");
    EXPECT_EQ(std::string((std::istreambuf_iterator<char>(after)), {}), rig);
}

TEST(SoundCardTest, AServerThatVanishesEndsTheProgramWithinSeconds) {
    const int server = process_of("CARD_SERVER_PID");
    TemporaryFolder folder;
    double killed_at = 0.0;
    const Clock clock;
    std::thread killer([&] {
        std::this_thread::sleep_for(std::chrono::milliseconds(1800));
        kill(server, SIGKILL);
        killed_at = clock.s();
    });
    const Outcome outcome =
        run_coldpin("check --yes --rig " + here + "rig.toml --device " + here + "preamp.toml", folder.path());
    killer.join();
    EXPECT_EQ(outcome.status, 3) << outcome.err;
    EXPECT_LT(clock.s() - killed_at, 8.0);
    EXPECT_THAT(outcome.err, testing::AnyOf(HasSubstr("stopped"), HasSubstr("does not answer"),
                                            HasSubstr("does not start"), HasSubstr("opened")));
}

TEST(SoundCardTest, AStalledDeviceCostsTimeButNoSample) {
    const int device = process_of("CARD_DEVICE_PID");
    std::thread staller([&] {
        std::this_thread::sleep_for(std::chrono::milliseconds(900));
        kill(device, SIGSTOP);
        std::this_thread::sleep_for(std::chrono::milliseconds(700));
        kill(device, SIGCONT);
    });
    const rig::Capture capture = capture_tone(2.0);
    staller.join();
    // Whatever the driver flagged: what is kept is whole.
    EXPECT_TRUE(
        rig::check_content(capture.recording.channels[0], 48000.0, *capture.description.stimulus).whole());
    EXPECT_LE(capture.takes, 2);
}

TEST(SoundCardTest, CtrlCEndsACaptureAtOnce) {
    TemporaryFolder folder;
    const Outcome outcome =
        run_coldpin("check --yes --rig " + here + "rig.toml --device " + here + "preamp.toml", folder.path(),
                    "timeout -s INT 2");
    EXPECT_LT(outcome.wall_s, 5.0);
    EXPECT_THAT(outcome.err, HasSubstr("interrupted"));
    EXPECT_FALSE(std::filesystem::exists(folder.path() / "runs"));
}

}  // namespace
}  // namespace coldpin::tests
