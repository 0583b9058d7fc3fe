#include "coldpin/profile/device_profile.h"

#include <gtest/gtest.h>

#include "refusal.h"

namespace coldpin::profile {
namespace {

using tests::refusal;
using tests::with;

// Every key that a profile can have, once at least.
const std::string whole = R"(schema = "coldpin-device/1"
name = "Tarn Two"

[device]
maker = "Tarnside"
description = "Two gains."
channels = ["left", "right"]
rated_source_ohms = 200
cautions = ["Valves: hot."]

[[setting]]
name = "low"
nominal_gain_db = 30

[[setting]]
name = "high"
nominal_gain_db = 60.5

[[plan]]
measure = "gain"
setting = "low"
drive_dbu = -26.5
frequencies_hz = [220, 997]
length_s = 0.5

[[plan]]
measure = "response"
setting = "low"
from_hz = 8
to_hz = 22000
length_s = 3
band_hz = [30, 18000]

[[plan]]
measure = "cmrr"
setting = "high"
common_mode_drive_dbu = -6
stimulus = "sweep"
from_hz = 20
to_hz = 5000

[[plan]]
measure = "hum"
setting = "high"
mains_hz = 60

[[plan]]
measure = "noise"
setting = "high"

[[requirement]]
quantity = "gain"
setting = "low"
frequency_hz = 220
min = 29.5
max = 30.5
unit = "dB"
why = "Because."

[[requirement]]
quantity = "magnitude"
setting = "low"
mask = [
  { frequency_hz = 20, min = -1.0, max = 0.5 },
  { frequency_hz = 1000, max = 0.25 },
  { frequency_hz = 20000, min = -2 },
]

[[requirement]]
quantity = "noise_input_referred"
weighting = "A"
max = 1e-6
unit = "V"

[[requirement]]
quantity = "hum_harmonic"
harmonic = 3
max = -70

[simulated_unit]
name = "one of them"
gain_db = { "low" = 30.1, "high" = 60.4 }
lower_corner_hz = 5
upper_corner_hz = 70000
input_noise_nv = 1.5
input_noise_pa = 0.9
flicker_corner_hz = 55
hum_input_dbu = -131
hum_harmonic_slope_db = -9
rejection_db = 88
rejection_corner_hz = 2500
max_output_dbu = 20
second_harmonic_db = -90
third_harmonic_db = -91
polarity = -1
second_channel_gain_offset_db = 0.07
)";

// One setting, one step, one requirement.
const std::string small = R"(schema = "coldpin-device/1"
name = "Tarn One"
[device]
maker = "Tarnside"
[[setting]]
name = "40 dB"
nominal_gain_db = 40
[[plan]]
measure = "gain"
[[requirement]]
quantity = "gain"
min = 39.5
max = 40.5
)";

std::string said(const std::string& text) {
    return refusal([&] { device_profile_from_text(text, "unit.toml"); });
}

TEST(DeviceProfileTest, KeepsWhatItReads) {
    const DeviceProfile profile = device_profile_from_text(whole, "tarn.toml");
    EXPECT_EQ(profile.name, "Tarn Two");
    EXPECT_EQ(profile.maker, "Tarnside");
    EXPECT_EQ(profile.description, "Two gains.");
    EXPECT_EQ(profile.channels, (std::vector<std::string>{"left", "right"}));
    EXPECT_EQ(profile.rated_source_ohms, 200.0);
    EXPECT_EQ(profile.cautions, std::vector<std::string>{"Valves: hot."});
    EXPECT_EQ(profile.source_text, whole);
    EXPECT_EQ(profile.source_name, "tarn.toml");
    ASSERT_EQ(profile.settings.size(), 2U);
    EXPECT_EQ(profile.settings[1].name, "high");
    EXPECT_EQ(profile.settings[1].nominal_gain_db, 60.5);
    ASSERT_NE(profile.find_setting("low"), nullptr);
    EXPECT_EQ(profile.find_setting("low")->nominal_gain_db, 30.0);
    EXPECT_EQ(profile.find_setting("middle"), nullptr);
}

TEST(DeviceProfileTest, KeepsThePlan) {
    const auto plan = device_profile_from_text(whole, "tarn.toml").plan;
    ASSERT_EQ(plan.size(), 5U);
    EXPECT_EQ(plan[0].measure, "gain");
    EXPECT_EQ(plan[0].setting, "low");
    EXPECT_EQ(plan[0].drive_dbu, -26.5);
    EXPECT_EQ(plan[0].frequencies_hz, (std::vector<double>{220.0, 997.0}));
    EXPECT_EQ(plan[0].length_s, 0.5);
    EXPECT_EQ(plan[0].line, tests::line_of(whole, "[[plan]]"));
    EXPECT_EQ(plan[1].from_hz, 8.0);
    EXPECT_EQ(plan[1].to_hz, 22000.0);
    EXPECT_EQ(plan[1].band.low_hz, 30.0);
    EXPECT_EQ(plan[1].band.high_hz, 18000.0);
    EXPECT_EQ(plan[2].common_mode_drive_dbu, -6.0);
    EXPECT_EQ(plan[2].stimulus, "sweep");
    EXPECT_EQ(plan[3].mains_hz, 60.0);
    EXPECT_EQ(plan[4].stimulus, "tones");
    EXPECT_EQ(plan[4].drive_dbu, std::nullopt);
    EXPECT_EQ(plan[4].length_s, std::nullopt);
    EXPECT_EQ(plan[4].band.low_hz, 20.0);
}

TEST(DeviceProfileTest, KeepsTheRequirements) {
    const auto requirements = device_profile_from_text(whole, "tarn.toml").requirements;
    ASSERT_EQ(requirements.size(), 4U);
    EXPECT_EQ(requirements[0].quantity, "gain");
    EXPECT_EQ(requirements[0].setting, "low");
    EXPECT_EQ(requirements[0].min, 29.5);
    EXPECT_EQ(requirements[0].max, 30.5);
    EXPECT_EQ(requirements[0].unit, "dB");
    EXPECT_EQ(requirements[0].why, "Because.");
    EXPECT_EQ(requirements[0].line, tests::line_of(whole, "[[requirement]]"));
    EXPECT_EQ(requirements[0].conditions, (measure::Conditions{{"frequency_hz", 220.0}}));
    ASSERT_EQ(requirements[1].mask.size(), 3U);
    EXPECT_EQ(requirements[1].mask[0].min, -1.0);
    EXPECT_EQ(requirements[1].mask[1].min, std::nullopt);
    EXPECT_EQ(requirements[1].mask[1].max, 0.25);
    EXPECT_EQ(requirements[1].mask[2].frequency_hz, 20000.0);
    EXPECT_EQ(requirements[1].mask[2].max, std::nullopt);
    EXPECT_EQ(requirements[1].unit, "dB");  // the quantity's own
    EXPECT_EQ(requirements[2].setting, "");
    EXPECT_EQ(requirements[2].unit, "V");
    EXPECT_EQ(requirements[2].conditions,
              (measure::Conditions{{"weighting", std::string("A")}, {"detector", std::string("rms")}}));
    EXPECT_EQ(requirements[3].conditions, (measure::Conditions{{"harmonic", 3.0}}));
}

TEST(DeviceProfileTest, KeepsTheSimulatedUnit) {
    const auto unit = device_profile_from_text(whole, "tarn.toml").simulated;
    ASSERT_TRUE(unit.has_value());
    EXPECT_EQ(unit->name, "one of them");
    EXPECT_EQ(unit->gain_db_by_setting, (std::map<std::string, double>{{"low", 30.1}, {"high", 60.4}}));
    EXPECT_EQ(unit->lower_corner_hz, 5.0);
    EXPECT_EQ(unit->upper_corner_hz, 70000.0);
    EXPECT_EQ(unit->input_noise_nv, 1.5);
    EXPECT_EQ(unit->input_noise_pa, 0.9);
    EXPECT_EQ(unit->flicker_corner_hz, 55.0);
    EXPECT_EQ(unit->hum_input_dbu, -131.0);
    EXPECT_EQ(unit->hum_harmonic_slope_db, -9.0);
    EXPECT_EQ(unit->rejection_db, 88.0);
    EXPECT_EQ(unit->rejection_corner_hz, 2500.0);
    EXPECT_EQ(unit->max_output_dbu, 20.0);
    EXPECT_EQ(unit->second_harmonic_db, -90.0);
    EXPECT_EQ(unit->third_harmonic_db, -91.0);
    EXPECT_EQ(unit->polarity, -1);
    EXPECT_EQ(unit->second_channel_gain_offset_db, 0.07);
}

TEST(DeviceProfileTest, AUnitWithoutAControlHasOneSettingWithoutAName) {
    const auto profile = device_profile_from_text(
        with(small, "[[setting]]\nname = \"40 dB\"\nnominal_gain_db = 40\n", ""), "unit.toml");
    ASSERT_EQ(profile.settings.size(), 1U);
    EXPECT_EQ(profile.settings[0].name, "");
    EXPECT_EQ(profile.plan[0].setting, "");
    EXPECT_EQ(profile.rated_source_ohms, 150.0);
    EXPECT_FALSE(profile.simulated.has_value());
}

TEST(DeviceProfileTest, TheOnlySettingNeedNotBeRepeated) {
    EXPECT_EQ(device_profile_from_text(small, "unit.toml").plan[0].setting, "40 dB");
}

TEST(DeviceProfileTest, LineEndsOfOtherSystemsAreFine) {
    std::string text = small;
    for (std::size_t i = 0; (i = text.find('\n', i)) != std::string::npos; i += 2) text.insert(i, "\r");
    EXPECT_EQ(said(text), "accepted");
    EXPECT_EQ(said("\xEF\xBB\xBF" + small), "accepted");
}

}  // namespace
}  // namespace coldpin::profile
