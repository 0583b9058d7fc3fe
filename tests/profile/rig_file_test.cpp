#include "coldpin/profile/rig_file.h"

#include <filesystem>

#include <gmock/gmock.h>
#include <gtest/gtest.h>

#include "coldpin/signal/text_file.h"

#include "refusal.h"

namespace coldpin::profile {
namespace {

using tests::refusal;
using tests::with;

// Every key that a rig file can have, on the back end that needs most.
const std::string whole = R"(schema = "coldpin-rig/1"
name = "bench two"
temperature_c = 23.5
fixture = "small"

[audio]
backend = "portaudio"
host_api = "ALSA"
output_device = "out box"
input_device = "in box"
sample_rate_hz = 96000
frames_per_buffer = 256

[outputs]
differential = 3
common_mode = 4

[inputs]
device = [1, 2]
reference = 3

[fixtures.big]
differential_loss_db = 60
differential_loss_uncertainty_db = 0.2

[fixtures.small]
name = "the small box"
differential_loss_db = 40.71
differential_loss_uncertainty_db = 0.1
common_mode_loss_db = 0.5
common_mode_loss_uncertainty_db = 0.15
source_ohms = 148.5
rejection_limit_db = 92

[limits]
max_preamp_input_dbu = -20
max_preamp_common_mode_dbu = 6
max_preamp_output_dbu = 18

[calibration]
output_full_scale_dbu = 14.1
output_uncertainty_db = 0.11
common_mode_output_full_scale_dbu = 14.2
input_full_scale_dbu = 16.3
input_uncertainty_db = 0.12
reference_full_scale_dbu = 16.4
time_utc = "2026-03-01T10:00:00Z"
remark = "knobs at the line"

[simulated]
seed = 42
real_time = true

[simulated.interface]
output_full_scale_dbu = 17
input_full_scale_dbu = 19
input_noise_dbfs = -101
output_noise_dbfs = -102
latency_frames = 100.25
ac_corner_hz = 2
second_harmonic_db = -90
third_harmonic_db = -91
leakage_db = -110
ground_loop_hum_dbfs = -99
mains_hz = 60.02
mains_drift_hz_per_s = 0.001

[simulated.preamp]
gain_db = { "x" = 33 }

[simulated.faults]
lose_frames_in_takes = 2
repeat_frames_in_takes = [1, 3]
zero_frames_in_takes = [4]
unplugged = true
cold_leg_open = true
legs_swapped = true
)";

const std::string small = R"(schema = "coldpin-rig/1"
name = "bench"
[audio]
backend = "portaudio"
device = "box"
[fixtures.head]
differential_loss_db = 40
differential_loss_uncertainty_db = 0.1
[limits]
max_preamp_input_dbu = -20
)";

std::string said(const std::string& text) {
    return refusal([&] { rig_from_text(text, "rig.toml"); });
}
std::string said_with(const std::string& from, const std::string& to) {
    return said(with(small, from, to));
}
// `small` ends with its line 10; what is added begins in line 11.
std::string said_after(const std::string& more) {
    return said(small + more);
}

TEST(RigFileTest, KeepsWhatItReads) {
    const RigFile file = rig_from_text(whole, "bench-two.toml");
    EXPECT_EQ(file.source_text, whole);
    EXPECT_EQ(file.source_name, "bench-two.toml");
    const rig::Setup& setup = file.setup;
    EXPECT_EQ(setup.name, "bench two");
    EXPECT_EQ(setup.temperature_c, 23.5);
    EXPECT_EQ(setup.audio.backend, rig::BackendKind::portaudio);
    EXPECT_EQ(setup.audio.host_api, "ALSA");
    EXPECT_EQ(setup.audio.output_device, "out box");
    EXPECT_EQ(setup.audio.input_device, "in box");
    EXPECT_EQ(setup.audio.sample_rate_hz, 96000.0);
    EXPECT_EQ(setup.audio.frames_per_buffer, 256U);
    EXPECT_EQ(setup.routing.differential_output, 3);
    EXPECT_EQ(setup.routing.common_mode_output, 4);
    EXPECT_EQ(setup.routing.device_inputs, (std::vector<int>{1, 2}));
    EXPECT_EQ(setup.routing.reference_input, 3);
    EXPECT_EQ(setup.limits.max_preamp_input_dbu, -20.0);
    EXPECT_EQ(setup.limits.max_preamp_common_mode_dbu, 6.0);
    EXPECT_EQ(setup.limits.max_preamp_output_dbu, 18.0);
}

TEST(RigFileTest, KeepsTheChosenFixtureAndTheCalibration) {
    const rig::Setup setup = rig_from_text(whole, "bench-two.toml").setup;
    EXPECT_EQ(setup.fixture.name, "the small box");
    EXPECT_EQ(setup.fixture.differential_loss_db, 40.71);
    EXPECT_EQ(setup.fixture.differential_loss_uncertainty_db, 0.1);
    EXPECT_EQ(setup.fixture.common_mode_loss_db, 0.5);
    EXPECT_EQ(setup.fixture.common_mode_loss_uncertainty_db, 0.15);
    EXPECT_EQ(setup.fixture.source_ohms, 148.5);
    EXPECT_EQ(setup.fixture.rejection_limit_db, 92.0);
    ASSERT_TRUE(setup.calibration.has_value());
    EXPECT_EQ(setup.calibration->output_full_scale_dbu, 14.1);
    EXPECT_EQ(setup.calibration->output_uncertainty_db, 0.11);
    EXPECT_EQ(setup.calibration->common_mode_output_full_scale_dbu, 14.2);
    EXPECT_EQ(setup.calibration->input_full_scale_dbu, 16.3);
    EXPECT_EQ(setup.calibration->input_uncertainty_db, 0.12);
    EXPECT_EQ(setup.calibration->reference_full_scale_dbu, 16.4);
    EXPECT_EQ(setup.calibration->time_utc, "2026-03-01T10:00:00Z");
    EXPECT_EQ(setup.calibration->remark, "knobs at the line");
}

TEST(RigFileTest, KeepsWhatIsPretended) {
    const rig::SimulatedSetup simulated = rig_from_text(whole, "bench-two.toml").setup.simulated;
    EXPECT_EQ(simulated.seed, 42U);
    EXPECT_TRUE(simulated.real_time);
    EXPECT_EQ(simulated.interface.output_full_scale_dbu, 17.0);
    EXPECT_EQ(simulated.interface.input_full_scale_dbu, 19.0);
    EXPECT_EQ(simulated.interface.input_noise_dbfs, -101.0);
    EXPECT_EQ(simulated.interface.output_noise_dbfs, -102.0);
    EXPECT_EQ(simulated.interface.latency_frames, 100.25);
    EXPECT_EQ(simulated.interface.ac_corner_hz, 2.0);
    EXPECT_EQ(simulated.interface.second_harmonic_db, -90.0);
    EXPECT_EQ(simulated.interface.third_harmonic_db, -91.0);
    EXPECT_EQ(simulated.interface.leakage_db, -110.0);
    EXPECT_EQ(simulated.interface.ground_loop_hum_dbfs, -99.0);
    EXPECT_EQ(simulated.interface.mains_hz, 60.02);
    EXPECT_EQ(simulated.interface.mains_drift_hz_per_s, 0.001);
    ASSERT_TRUE(simulated.preamp.has_value());
    EXPECT_EQ(simulated.preamp->gain_db_by_setting.at("x"), 33.0);
    EXPECT_EQ(simulated.faults.lose_frames_in_takes, std::vector<int>{2});
    EXPECT_EQ(simulated.faults.repeat_frames_in_takes, (std::vector<int>{1, 3}));
    EXPECT_EQ(simulated.faults.zero_frames_in_takes, std::vector<int>{4});
    EXPECT_TRUE(simulated.faults.unplugged);
    EXPECT_TRUE(simulated.faults.cold_leg_open);
    EXPECT_TRUE(simulated.faults.legs_swapped);
}

TEST(RigFileTest, TheOnlyFixtureIsTheOneInUse) {
    const rig::Setup setup = rig_from_text(small, "rig.toml").setup;
    EXPECT_EQ(setup.fixture.name, "head");
    EXPECT_EQ(setup.audio.output_device, "box");
    EXPECT_EQ(setup.audio.input_device, "box");
    EXPECT_EQ(setup.routing.device_inputs, std::vector<int>{1});
    EXPECT_EQ(setup.routing.common_mode_output, std::nullopt);
    EXPECT_FALSE(setup.calibration.has_value());
}

TEST(RigFileTest, TheWordSimulatedIsTheShippedFileCompiledIn) {
    const std::string file = std::string(COLDPIN_SOURCE_DIR) + "/profiles/rigs/simulated.toml";
    const RigFile built_in = read_rig("simulated");
    EXPECT_EQ(built_in.source_text, signal::read_text_file(file));
    EXPECT_EQ(built_in.source_name, "simulated");
    EXPECT_EQ(built_in.setup.audio.backend, rig::BackendKind::simulated);
    EXPECT_EQ(read_rig(file).source_name, "simulated.toml");
}

TEST(RigFileTest, AStoredRigsFolderIsRelativeToItsFile) {
    const auto folder = std::filesystem::path(testing::TempDir()) / "coldpin_rig_file_test";
    std::filesystem::create_directories(folder);
    const std::string stored = with(with(small, "\"portaudio\"", "\"stored\""), "device = \"box\"\n", "");
    signal::write_text_file(folder / "r.toml", stored + "[stored]\nfolder = \"takes\"\n");
    EXPECT_EQ(read_rig((folder / "r.toml").string()).setup.stored_folder, folder / "takes");
    std::filesystem::remove_all(folder);
    EXPECT_EQ(said(stored),
              "rig.toml:1:1: stored: found nothing, expected [stored] with the folder where the takes lie");
}

TEST(RigFileTest, RefusesOtherSchemas) {
    EXPECT_EQ(
        said_with("rig/1", "device/1"),
        "rig.toml:1:10: schema: found 'coldpin-device/1', expected \"coldpin-rig/1\" (a rig file): is this a "
        "file of another kind?");
    EXPECT_EQ(
        said_with("rig/1", "rig/7"),
        "rig.toml:1:10: schema: found 'coldpin-rig/7', expected \"coldpin-rig/1\" (a rig file): the file was "
        "written for another version of this program");
}

TEST(RigFileTest, RefusesUnknownKeysWithTheNearestKnownOne) {
    EXPECT_EQ(said_with("[limits]", "[limit]"),
              "rig.toml:9:2: found the unknown key 'limit', expected a known one; did you mean 'limits'?");
    EXPECT_EQ(
        said_after("max_preamp_ouput_dbu = 3\n"),
        "rig.toml:11:1: in [limits]: found the unknown key 'max_preamp_ouput_dbu', expected a known one; did "
        "you mean 'max_preamp_output_dbu'?");
    EXPECT_EQ(
        said_after("[simulated.interface]\nlatency = 3\n"),
        "rig.toml:12:1: in [simulated.interface]: found the unknown key 'latency', expected a known one; did "
        "you mean 'latency_frames'?");
}

TEST(RigFileTest, RefusesBackEndsThatDoNotExist) {
    EXPECT_EQ(said_with("\"portaudio\"", "\"portadio\""),
              "rig.toml:4:11: in [audio] backend: found 'portadio', expected portaudio, simulated or stored; "
              "did you "
              "mean 'portaudio'?");
    EXPECT_EQ(said_with("backend = \"portaudio\"\n", ""),
              "rig.toml:3:1: in [audio] backend: found nothing, expected portaudio, simulated or stored");
    EXPECT_EQ(said_with("[audio]\nbackend = \"portaudio\"\ndevice = \"box\"\n", ""),
              "rig.toml:1:1: audio: found nothing, expected [audio] with its backend");
}

TEST(RigFileTest, RefusesARealRigWithoutADeviceCeilingOrUncertainty) {
    EXPECT_EQ(said_with("device = \"box\"\n", ""),
              "rig.toml:3:1: in [audio] device: found nothing, expected the interface's name (coldpin "
              "devices lists "
              "them)");
    EXPECT_EQ(said_with("[limits]\nmax_preamp_input_dbu = -20\n", ""),
              "rig.toml:1:1: limits: found nothing, expected [limits] with max_preamp_input_dbu, the level "
              "never to "
              "be exceeded");
    EXPECT_EQ(said_with("max_preamp_input_dbu = -20\n", "max_preamp_output_dbu = 18\n"),
              "rig.toml:9:1: in [limits] max_preamp_input_dbu: found nothing, expected the level never to be "
              "exceeded "
              "at the preamp's input");
    EXPECT_EQ(
        said_with("differential_loss_uncertainty_db = 0.1\n", ""),
        "rig.toml:6:1: in [fixtures.head] differential_loss_uncertainty_db: found nothing, expected a number "
        "from 0 to 20");
    EXPECT_EQ(said_after("[calibration]\noutput_full_scale_dbu = 18\ninput_full_scale_dbu = 18\n"
                         "output_uncertainty_db = 0.1\n"),
              "rig.toml:11:1: in [calibration] input_uncertainty_db: found nothing, expected a number from 0 "
              "to 20");
    EXPECT_EQ(said(with(with(small, "\"portaudio\"", "\"simulated\""),
                        "differential_loss_uncertainty_db = 0.1\n", "")),
              "accepted");
}

TEST(RigFileTest, RefusesAMissingFullScaleAndDoesNotTakeTheOtherForIt) {
    EXPECT_EQ(said_after("[calibration]\ninput_full_scale_dbu = 18\n"),
              "rig.toml:11:1: in [calibration] output_full_scale_dbu: found nothing, expected a number from "
              "-100 to "
              "60");
}

TEST(RigFileTest, RefusesChannelsUsedTwice) {
    EXPECT_EQ(
        said_after("[outputs]\ndifferential = 2\ncommon_mode = 2\n"),
        "rig.toml:13:15: in [outputs] common_mode: found 2, the differential output, expected another output "
        "(leave the line out on a rig with one output)");
    EXPECT_EQ(said_after("[inputs]\ndevice = [1, 2]\nreference = 2\n"),
              "rig.toml:13:13: in [inputs] reference: found 2, which hears the preamp, expected another "
              "input (leave "
              "the line out when nothing is wired there)");
    // The device is heard at input 1 when nothing else is said.
    EXPECT_EQ(said_after("[inputs]\nreference = 1\n"),
              "rig.toml:12:13: in [inputs] reference: found 1, which hears the preamp, expected another "
              "input (leave "
              "the line out when nothing is wired there)");
    EXPECT_EQ(
        said_after("[inputs]\ndevice = [3, 1, 3]\n"),
        "rig.toml:12:10: in [inputs] device: found 3 twice, expected an input of its own for each channel");
    EXPECT_EQ(
        said_after("[inputs]\ndevice = []\n"),
        "rig.toml:12:10: in [inputs] device: found an empty list, expected the input that hears the preamp");
    EXPECT_EQ(said_after("[inputs]\ndevice = 0\n"),
              "rig.toml:12:10: in [inputs] device: found 0, expected a whole number from 1 to 128");
}

TEST(RigFileTest, RefusesFixturesThatAreMissingUndecidedOrUnknown) {
    EXPECT_EQ(
        said_with("[fixtures.head]\ndifferential_loss_db = 40\ndifferential_loss_uncertainty_db = 0.1\n", ""),
        "rig.toml:1:1: fixtures: found nothing, expected [fixtures.NAME]: what sits between the interface's "
        "output and the preamp's input");
    const std::string second =
        "[fixtures.tail]\ndifferential_loss_db = 60\ndifferential_loss_uncertainty_db = 0.1\n";
    EXPECT_EQ(
        said_after(second),
        "rig.toml:1:1: fixture: found nothing, expected the one in use of head or tail, such as fixture = "
        "\"NAME\"");
    EXPECT_EQ(
        said(with(small, "[audio]", "fixture = \"hed\"\n[audio]") + second),
        "rig.toml:3:11: fixture: found 'hed', expected the name of a [fixtures.NAME]: head or tail; did you "
        "mean 'head'?");
    EXPECT_EQ(
        said_with("differential_loss_db = 40\n", ""),
        "rig.toml:6:1: in [fixtures.head] differential_loss_db: found nothing, expected a number from -60 to "
        "140");
}

TEST(RigFileTest, RefusesNumbersOutOfRange) {
    EXPECT_EQ(said_with("device = \"box\"", "device = \"box\"\nsample_rate_hz = 4000"),
              "rig.toml:6:18: in [audio] sample_rate_hz: found 4000, expected a number from 8000 to 768000");
    EXPECT_EQ(
        said_with("device = \"box\"", "device = \"box\"\nframes_per_buffer = 12.5"),
        "rig.toml:6:21: in [audio] frames_per_buffer: found 12.5, expected a whole number from 0 to 65536");
    EXPECT_EQ(said_with("max_preamp_input_dbu = -20", "max_preamp_input_dbu = inf"),
              "rig.toml:10:24: in [limits] max_preamp_input_dbu: found a value that is not finite, expected "
              "a number");
    EXPECT_EQ(said_after("[simulated]\nseed = -1\n"),
              "rig.toml:12:8: in [simulated] seed: found -1, expected a whole number from 0 to 1000000000");
    EXPECT_EQ(said_after("[simulated]\nreal_time = 1\n"),
              "rig.toml:12:13: in [simulated] real_time: found 1, expected true or false");
}

TEST(RigFileTest, NamesAFileThatIsMissing) {
    EXPECT_THAT(refusal([] { read_rig("simulatd"); }), testing::StartsWith("simulatd: "));
}

}  // namespace
}  // namespace coldpin::profile
