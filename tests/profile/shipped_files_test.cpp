// The profiles and rig files that come with the program: usable as they are, and kept to what they say.
#include <algorithm>
#include <cmath>
#include <filesystem>
#include <set>

#include <gmock/gmock.h>
#include <gtest/gtest.h>

#include "coldpin/profile/device_profile.h"
#include "coldpin/profile/rig_file.h"
#include "coldpin/signal/text_file.h"

namespace coldpin::profile {
namespace {

const std::filesystem::path folder = std::filesystem::path(COLDPIN_SOURCE_DIR) / "profiles";

std::vector<std::filesystem::path> files_in(const std::string& name) {
    std::vector<std::filesystem::path> files;
    for (const auto& entry : std::filesystem::directory_iterator(folder / name))
        if (entry.path().extension() == ".toml") files.push_back(entry.path());
    std::sort(files.begin(), files.end());
    return files;
}

// What a step plays: the defaults of the planner where the profile says nothing.
double played_s(const PlanStep& step) {
    if (step.measure == "gain")
        return step.length_s.value_or(1.0) *
               static_cast<double>(std::max<std::size_t>(1, step.frequencies_hz.size()));
    if (step.measure == "cmrr") return 2.0 * step.length_s.value_or(3.0);
    if (step.measure == "response" || step.measure == "noise") return step.length_s.value_or(4.0);
    return 0.0;  // hum shares the noise recording, polarity and latency the sweep
}

TEST(ShippedFilesTest, AtLeastSixDeviceProfilesOfDifferentKindsAreReadable) {
    const auto files = files_in("devices");
    EXPECT_GE(files.size(), 6U);
    std::size_t two_channels = 0, gain_switches = 0;
    for (const auto& file : files) {
        SCOPED_TRACE(file.filename().string());
        const DeviceProfile profile = read_device_profile(file);
        EXPECT_EQ(profile.source_name, file.filename().string());
        two_channels += profile.channels.size() == 2 ? 1 : 0;
        gain_switches += profile.settings.size() >= 3 ? 1 : 0;
        EXPECT_FALSE(profile.maker.empty());
        EXPECT_FALSE(profile.description.empty());
        EXPECT_FALSE(profile.cautions.empty());
        EXPECT_TRUE(profile.simulated.has_value()) << "--rig simulated should show this unit";
    }
    EXPECT_GE(two_channels, 1U);
    EXPECT_GE(gain_switches, 1U);
}

TEST(ShippedFilesTest, EveryProfileAsksForWhatMakesAPreampGood) {
    for (const auto& file : files_in("devices")) {
        SCOPED_TRACE(file.filename().string());
        std::set<std::string> asked;
        std::set<double> rejection_hz;
        for (const auto& requirement : read_device_profile(file).requirements) {
            asked.insert(requirement.quantity);
            if (requirement.quantity == "common_mode_rejection")
                rejection_hz.insert(std::get<double>(*requirement.conditions.find("frequency_hz")));
        }
        for (const char* quantity :
             {"gain", "magnitude", "lower_corner", "upper_corner", "noise_input_referred",
              "hum_input_referred", "common_mode_rejection", "polarity"})
            EXPECT_EQ(asked.count(quantity), 1U) << quantity;
        EXPECT_GE(rejection_hz.size(), 3U);
    }
}

TEST(ShippedFilesTest, APlanTakesNoMoreThanTwentySecondsOfSoundASetting) {
    for (const auto& file : files_in("devices")) {
        const DeviceProfile profile = read_device_profile(file);
        for (const auto& setting : profile.settings) {
            double seconds = 0.0;
            for (const auto& step : profile.plan)
                if (step.setting == setting.name) seconds += played_s(step);
            EXPECT_LE(seconds, 20.0) << file.filename() << " at " << setting.name;
            EXPECT_GT(seconds, 0.0) << file.filename() << " at " << setting.name
                                    << ": declared, never measured";
        }
    }
}

// Thermal noise of the rated source, 4 k T R B with the SI value of k, at 20 degrees over 20 Hz to 20 kHz, is
// the floor under any noise at the input.
TEST(ShippedFilesTest, NoUnitIsAskedOrPretendedToBeQuieterThanItsSource) {
    for (const auto& file : files_in("devices")) {
        SCOPED_TRACE(file.filename().string());
        const DeviceProfile profile = read_device_profile(file);
        const double source = 4.0 * 1.380649e-23 * 293.15 * profile.rated_source_ohms;  // V^2 / Hz
        const auto level_dbu = [](double density) { return 10.0 * std::log10(density * 19980.0 / 0.6); };
        const double floor_dbu = level_dbu(source);
        const double current_v = profile.simulated->input_noise_pa * 1e-12 * profile.rated_source_ohms,
                     voltage_v = profile.simulated->input_noise_nv * 1e-9;
        const double unit_dbu = level_dbu(source + current_v * current_v + voltage_v * voltage_v);
        for (const auto& requirement : profile.requirements) {
            if (requirement.quantity != "noise_input_referred" ||
                *requirement.conditions.find("weighting") != measure::ConditionValue(std::string("none")))
                continue;
            EXPECT_GT(*requirement.max, floor_dbu);
            EXPECT_LT(unit_dbu, *requirement.max - 0.5) << "the pretended unit needs a margin";
        }
    }
}

// Worst case of four resistors of tolerance t around a difference amplifier of gain G: (1 + G) / (4 t).
// Handbook formula; common practice.
TEST(ShippedFilesTest, TheDifferenceAmplifierIsAskedForNoMoreThanItsResistorsAllow) {
    const DeviceProfile profile = read_device_profile(folder / "devices" / "fennmark-pl2.toml");
    const double worst_db = 20.0 * std::log10((1.0 + 100.0) / (4.0 * 0.01));
    EXPECT_NEAR(worst_db, 68.0, 0.1);
    for (const auto& requirement : profile.requirements)
        if (requirement.quantity == "common_mode_rejection") {
            EXPECT_LT(*requirement.min, worst_db);
        }
}

TEST(ShippedFilesTest, EveryRigFileIsReadableAndHasCeilings) {
    const auto files = files_in("rigs");
    EXPECT_GE(files.size(), 6U);
    for (const auto& file : files) {
        SCOPED_TRACE(file.filename().string());
        const RigFile rig = read_rig(file.string());
        EXPECT_TRUE(rig.setup.limits.max_preamp_input_dbu.has_value());
        EXPECT_TRUE(rig.setup.limits.max_preamp_output_dbu.has_value());
        EXPECT_TRUE(rig.setup.calibration.has_value());
    }
}

TEST(ShippedFilesTest, RigFilesForRealInterfacesCarryTheCautions) {
    for (const char* name : {"two-output-interface.toml", "one-output-interface.toml"}) {
        const std::string text = signal::read_text_file(folder / "rigs" / name);
        EXPECT_THAT(text, testing::HasSubstr("48 V")) << name;
        EXPECT_THAT(text, testing::HasSubstr("onitors")) << name;
        EXPECT_THAT(text, testing::HasSubstr("safety earth")) << name;
        EXPECT_THAT(text, testing::HasSubstr("local codes")) << name;
    }
}

// Balanced U-pad with R in each leg and S across, loaded by Z: loss = (2 R + P) / P, P = S parallel Z.
// Voltage divider.
TEST(ShippedFilesTest, ThePadOfTheSimulatedRigIsTheOneItsCommentDescribes) {
    const double parallel = 150.0 * 2000.0 / (150.0 + 2000.0);
    const double loss_db = 20.0 * std::log10((2.0 * 7500.0 + parallel) / parallel);
    const rig::Setup setup = read_rig("simulated").setup;
    EXPECT_NEAR(setup.fixture.differential_loss_db, loss_db, 0.005);
    // The pad's output: S parallel to both series resistors.
    EXPECT_NEAR(setup.fixture.source_ohms, 150.0 * 15000.0 / 15150.0, 0.05);
    EXPECT_EQ(setup.calibration->input_full_scale_dbu, setup.simulated.interface.input_full_scale_dbu);
    EXPECT_EQ(setup.calibration->output_full_scale_dbu, setup.simulated.interface.output_full_scale_dbu);
}

}  // namespace
}  // namespace coldpin::profile
