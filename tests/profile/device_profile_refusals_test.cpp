// Every mistake in a device profile is refused at its line and column, with what stands there and what is
// expected.
#include <gmock/gmock.h>
#include <gtest/gtest.h>

#include "coldpin/profile/device_profile.h"

#include "refusal.h"

namespace coldpin::profile {
namespace {

using tests::refusal;
using tests::with;

// One setting, one step, one requirement: the ground on which mistakes are made.
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
std::string said_with(const std::string& from, const std::string& to) {
    return said(with(small, from, to));
}
std::string at(long line, long column, const std::string& rest) {
    return "unit.toml:" + std::to_string(line) + ":" + std::to_string(column) + ": " + rest;
}
// `small` ends with its line 13; what is added begins in line 14.
std::string said_after(const std::string& more) {
    return said(small + more);
}

TEST(DeviceProfileRefusalsTest, RefusesOtherSchemas) {
    EXPECT_EQ(said_with("schema = \"coldpin-device/1\"", ""),
              at(1, 1, "schema: found nothing, expected \"coldpin-device/1\" (a device profile)"));
    EXPECT_EQ(
        said_with("device/1", "device/2"),
        at(1, 10,
           "schema: found 'coldpin-device/2', expected \"coldpin-device/1\" (a device profile): the file was "
           "written for another version of this program"));
    EXPECT_EQ(
        said_with("device/1", "rig/1"),
        at(1, 10,
           "schema: found 'coldpin-rig/1', expected \"coldpin-device/1\" (a device profile): is this a file "
           "of another kind?"));
}

TEST(DeviceProfileRefusalsTest, RefusesUnknownKeysWithTheNearestKnownOne) {
    EXPECT_EQ(
        said_with("maker =", "makr ="),
        at(4, 1, "in [device]: found the unknown key 'makr', expected a known one; did you mean 'maker'?"));
    EXPECT_EQ(said_with("[[plan]]", "[[plans]]"),
              at(8, 3, "found the unknown key 'plans', expected a known one; did you mean 'plan'?"));
    EXPECT_EQ(
        said_with("min =", "mn ="),
        at(12, 1,
           "in [[requirement]]: found the unknown key 'mn', expected a known one; did you mean 'min'?"));
}

TEST(DeviceProfileRefusalsTest, RefusesMissingOrMisspeltNames) {
    EXPECT_EQ(said_with("name = \"Tarn One\"\n", ""),
              at(1, 1, "name: found nothing, expected a text in quotes"));
    EXPECT_EQ(
        said_with("quantity =", "quantiy ="),
        at(11, 1,
           "in [[requirement]] quantity: found nothing, expected a text in quotes; did you mean 'quantity' "
           "where 'quantiy' stands?"));
    EXPECT_EQ(said_with("measure = \"gain\"", ""),
              at(8, 1,
                 "in [[plan]] measure: found nothing, expected gain, response, noise, hum, cmrr, distortion, "
                 "polarity or latency"));
}

TEST(DeviceProfileRefusalsTest, RefusesMeasurementsAndQuantitiesThatDoNotExist) {
    EXPECT_EQ(said_with("measure = \"gain\"", "measure = \"gian\""),
              at(9, 11,
                 "in [[plan]] measure: found 'gian', expected gain, response, noise, hum, cmrr, distortion, "
                 "polarity or latency; "
                 "did you mean 'gain'?"));
    EXPECT_EQ(
        said_with("quantity = \"gain\"", "quantity = \"noise_imput_referred\""),
        at(11, 12,
           "in [[requirement]] quantity: found 'noise_imput_referred', expected the name of a quantity; did "
           "you mean 'noise_input_referred'?"));
    EXPECT_THAT(said_with("quantity = \"gain\"", "quantity = \"smell\""),
                testing::StartsWith(
                    at(11, 12, "in [[requirement]] quantity: found 'smell', expected one of gain, ")));
}

TEST(DeviceProfileRefusalsTest, RefusesAMinAboveItsMax) {
    EXPECT_EQ(said_with("min = 39.5", "min = 41"),
              at(12, 7, "in [[requirement]] min: found 41, expected no more than max, which is 40.5"));
    EXPECT_EQ(said_with("min = 39.5", "min = 40.5"), "accepted");
}

TEST(DeviceProfileRefusalsTest, RefusesARequirementWithoutALimit) {
    EXPECT_EQ(said_with("min = 39.5\nmax = 40.5\n", ""),
              at(10, 1, "in [[requirement]]: found neither min nor max, expected a limit"));
}

TEST(DeviceProfileRefusalsTest, RefusesUnitsTheQuantityDoesNotHave) {
    EXPECT_EQ(said_with("min = 39.5", "unit = \"dBu\"\nmin = 39.5"),
              at(12, 8, "in [[requirement]] unit: found 'dBu', expected dB; did you mean 'dB'?"));
    EXPECT_EQ(
        said_after("[[plan]]\nmeasure = \"noise\"\n[[requirement]]\nquantity = \"noise_output\"\nmax = 1\n"
                   "unit = \"dBW\"\n"),
        at(19, 8, "in [[requirement]] unit: found 'dBW', expected dBu, dBV, V or dBFS; did you mean 'dBu'?"));
    EXPECT_EQ(
        said_after("[[plan]]\nmeasure = \"polarity\"\n[[requirement]]\nquantity = \"polarity\"\nmin = 1\n"
                   "unit = \"dB\"\n"),
        at(19, 8, "in [[requirement]] unit: found 'dB', expected no unit (\"\")"));
}

TEST(DeviceProfileRefusalsTest, RefusesConditionsTheQuantityDoesNotHave) {
    EXPECT_EQ(said_with("min = 39.5", "weighting = \"A\"\nmin = 39.5"),
              at(12, 13,
                 "in [[requirement]] weighting: found a condition that 'gain' does not have, expected "
                 "frequency_hz"));
    EXPECT_EQ(
        said_after("[[plan]]\nmeasure = \"noise\"\n[[requirement]]\nquantity = \"noise_figure\"\nmax = 4\n"
                   "weighting = \"A\"\n"),
        at(19, 13,
           "in [[requirement]] weighting: found a condition that 'noise_figure' does not have, expected no "
           "condition"));
}

TEST(DeviceProfileRefusalsTest, RefusesWeightingsThatDoNotExist) {
    EXPECT_EQ(
        said_after("[[plan]]\nmeasure = \"noise\"\n[[requirement]]\nquantity = \"noise_output\"\nmax = 1\n"
                   "weighting = \"B\"\n"),
        at(19, 13, "in [[requirement]] weighting: found 'B', expected none, A, C or 468"));
}

TEST(DeviceProfileRefusalsTest, RefusesASettingThatIsNotDeclared) {
    EXPECT_EQ(said_with("min = 39.5", "setting = \"41 dB\"\nmin = 39.5"),
              at(12, 11,
                 "in [[requirement]] setting: found '41 dB', expected a declared [[setting]]: '40 dB'; did "
                 "you mean "
                 "'40 dB'?"));
    EXPECT_EQ(said_with("measure = \"gain\"", "measure = \"gain\"\nsetting = \"loud\""),
              at(10, 11, "in [[plan]] setting: found 'loud', expected a declared [[setting]]: '40 dB'"));
}

TEST(DeviceProfileRefusalsTest, RefusesAStepThatLeavesTheSettingOpen) {
    EXPECT_EQ(
        said_with("[[plan]]", "[[setting]]\nname = \"60 dB\"\n[[plan]]"),
        at(10, 1, "in [[plan]] setting: found nothing, expected a declared [[setting]]: '40 dB', '60 dB'"));
}

TEST(DeviceProfileRefusalsTest, RefusesTwoSettingsOrChannelsOfOneName) {
    EXPECT_EQ(said_with("[[plan]]", "[[setting]]\nname = \"40 dB\"\n[[plan]]"),
              at(9, 8,
                 "in [[setting]] name: found '40 dB' a second time, expected a name of its own for each "
                 "[[setting]]"));
    EXPECT_EQ(
        said_with("maker = \"Tarnside\"", "channels = [\"a\", \"a\"]"),
        at(4, 12, "in [device] channels: found 'a' twice, expected a name of its own for each channel"));
}

TEST(DeviceProfileRefusalsTest, RefusesARequirementThatNoStepMeasures) {
    EXPECT_EQ(said_with("quantity = \"gain\"", "quantity = \"noise_output\""),
              at(11, 12,
                 "in [[requirement]] quantity: found 'noise_output', which no step measures, expected a "
                 "[[plan]] step "
                 "with measure = \"noise\""));
    EXPECT_EQ(
        said(with(with(small, "[[plan]]\n", "[[setting]]\nname = \"60 dB\"\n[[plan]]\nsetting = \"60 dB\"\n"),
                  "min = 39.5", "setting = \"40 dB\"\nmin = 39.5")),
        at(14, 12,
           "in [[requirement]] quantity: found 'gain', which no step measures, expected a [[plan]] step with "
           "measure = \"gain\" and setting = \"40 dB\""));
}

TEST(DeviceProfileRefusalsTest, RefusesAFrequencyThatNoStepPlays) {
    EXPECT_EQ(said_with("min = 39.5", "frequency_hz = 1000\nmin = 39.5"),
              at(12, 16,
                 "in [[requirement]] frequency_hz: found 1000, expected one that the plan measures: 997 Hz"));
    EXPECT_EQ(said_with("min = 39.5", "frequency_hz = 997\nmin = 39.5"), "accepted");
    // A sweep's rejection is given at round frequencies inside it.
    const std::string sweep =
        "[[plan]]\nmeasure = \"cmrr\"\nstimulus = \"sweep\"\nto_hz = 5000\n[[requirement]]\n"
        "quantity = \"common_mode_rejection\"\nmin = 60\nfrequency_hz = ";
    EXPECT_EQ(said_after(sweep + "1000\n"), "accepted");
    EXPECT_EQ(said_after(sweep + "10000\n"), at(21, 16,
                                                "in [[requirement]] frequency_hz: found 10000, expected one "
                                                "that the plan measures: 100, 1000 Hz"));
}

TEST(DeviceProfileRefusalsTest, RefusesToLeaveOpenWhichOfSeveralTonesIsMeant) {
    EXPECT_EQ(
        said_after("[[plan]]\nmeasure = \"cmrr\"\n[[requirement]]\nquantity = \"common_mode_rejection\"\n"
                   "min = 60\n"),
        at(16, 1,
           "in [[requirement]] frequency_hz: found nothing, expected one that the plan measures: 85, 997, "
           "9973 "
           "Hz"));
    EXPECT_EQ(
        said_after("[[plan]]\nmeasure = \"hum\"\n[[requirement]]\nquantity = \"hum_harmonic\"\nmax = -80\n"),
        at(16, 1,
           "in [[requirement]] harmonic: found nothing, expected the number of the mains harmonic, 1 for the "
           "fundamental"));
}

TEST(DeviceProfileRefusalsTest, TwoStepsAtOneSettingOfferTheFrequenciesOfBoth) {
    EXPECT_EQ(said(with(small, "min = 39.5", "frequency_hz = 100\nmin = 39.5") +
                   "[[plan]]\nmeasure = \"gain\"\nfrequencies_hz = 100\n"),
              "accepted");
}

TEST(DeviceProfileRefusalsTest, RefusesAnEmptyPlan) {
    EXPECT_EQ(said_with("[[plan]]\nmeasure = \"gain\"\n", ""),
              at(1, 1, "plan: found nothing, expected at least one [[plan]] step that says what to measure"));
}

TEST(DeviceProfileRefusalsTest, RefusesFrequenciesLengthsAndLevelsOutOfRange) {
    const auto step = [](const std::string& line) {
        return said_with("measure = \"gain\"", "measure = \"gain\"\n" + line);
    };
    EXPECT_EQ(step("frequencies_hz = 0"),
              at(10, 18, "in [[plan]] frequencies_hz: found 0, expected a number from 0.1 to 96000"));
    EXPECT_EQ(step("frequencies_hz = [997, 96001]"),
              at(10, 24, "in [[plan]] frequencies_hz: found 96001, expected a number from 0.1 to 96000"));
    EXPECT_EQ(step("frequencies_hz = []"),
              at(10, 18,
                 "in [[plan]] frequencies_hz: found an empty list, expected a frequency or a list of them"));
    EXPECT_EQ(step("frequencies_hz = [997, 100, 997]"),
              at(10, 18, "in [[plan]] frequencies_hz: found 997 twice, expected each frequency once"));
    EXPECT_EQ(step("length_s = 0.04"),
              at(10, 12, "in [[plan]] length_s: found 0.04, expected a number from 0.05 to 120"));
    EXPECT_EQ(step("length_s = 121"),
              at(10, 12, "in [[plan]] length_s: found 121, expected a number from 0.05 to 120"));
    EXPECT_EQ(step("length_s = 0.05"), "accepted");
    EXPECT_EQ(step("length_s = 120"), "accepted");
    EXPECT_EQ(step("drive_dbu = nan"),
              at(10, 13, "in [[plan]] drive_dbu: found a value that is not finite, expected a number"));
}

TEST(DeviceProfileRefusalsTest, RefusesSweepsAndBandsThatRunBackwards) {
    EXPECT_EQ(said_after("[[plan]]\nmeasure = \"response\"\nfrom_hz = 100\nto_hz = 50\n"),
              at(17, 9, "in [[plan]] to_hz: found 50, expected a frequency above from_hz, which is 100"));
    EXPECT_EQ(
        said_after("[[plan]]\nmeasure = \"response\"\nband_hz = [200, 100]\n"),
        at(16, 11,
           "in [[plan]] band_hz: found [200, 100], expected two frequencies, low and high, such as [20, "
           "20000]"));
    EXPECT_EQ(said_after("[[plan]]\nmeasure = \"response\"\nband_hz = [200]\n"),
              at(16, 11,
                 "in [[plan]] band_hz: found 1 number, expected two frequencies, low and high, such as [20, "
                 "20000]"));
}

TEST(DeviceProfileRefusalsTest, RefusesKeysThatTheStepWouldIgnore) {
    EXPECT_EQ(said_with("measure = \"gain\"", "measure = \"gain\"\nmains_hz = 50"),
              at(10, 12,
                 "in [[plan]] mains_hz: found 'mains_hz' in a step that measures gain, expected it only "
                 "where hum is "
                 "measured"));
    EXPECT_EQ(said_after("[[plan]]\nmeasure = \"cmrr\"\nfrom_hz = 20\n"),
              at(16, 11,
                 "in [[plan]] from_hz: found a sweep's end in a step that plays tones, expected stimulus = "
                 "\"sweep\" "
                 "with it"));
    EXPECT_EQ(
        said_after("[[plan]]\nmeasure = \"cmrr\"\nstimulus = \"sweep\"\nfrequencies_hz = 50\n"),
        at(17, 18,
           "in [[plan]] frequencies_hz: found frequencies in a step that plays a sweep, expected stimulus = "
           "\"tones\" with them"));
    EXPECT_EQ(
        said_after("[[plan]]\nmeasure = \"cmrr\"\nstimulus = \"swep\"\n"),
        at(16, 12, "in [[plan]] stimulus: found 'swep', expected tones or sweep; did you mean 'sweep'?"));
}

const std::string masked = "[[plan]]\nmeasure = \"response\"\n[[requirement]]\nquantity = \"magnitude\"\n";

TEST(DeviceProfileRefusalsTest, RefusesAMaskThatDoesNotRise) {
    EXPECT_EQ(
        said_after(masked + "mask = [{ frequency_hz = 50, min = -1 },\n{ frequency_hz = 50, min = -1 }]\n"),
        at(19, 18,
           "in [[requirement]] mask frequency_hz: found 50, expected more than 50, the frequency before"));
}

TEST(DeviceProfileRefusalsTest, RefusesMaskPointsWithoutOrWithCrossedLimits) {
    EXPECT_EQ(
        said_after(masked + "mask = [{ frequency_hz = 50 }]\n"),
        at(18, 9, "in [[requirement]] mask: found neither min nor max, expected a limit at this frequency"));
    EXPECT_EQ(said_after(masked + "mask = [{ frequency_hz = 50, min = 1, max = -1 }]\n"),
              at(18, 36, "in [[requirement]] mask min: found 1, expected no more than max, which is -1"));
    EXPECT_EQ(
        said_after(masked + "mask = [{ frequency_hz = 50, mn = 1 }]\n"),
        at(18, 30,
           "in [[requirement]] mask: found the unknown key 'mn', expected a known one; did you mean 'min'?"));
    EXPECT_EQ(said_after(masked + "mask = 3\n"),
              at(18, 8, "in [[requirement]] mask: found 3, expected a list of tables"));
}

TEST(DeviceProfileRefusalsTest, RefusesALimitThatSpansNothing) {
    EXPECT_EQ(
        said_after(masked +
                   "mask = [{ frequency_hz = 50, min = -1, max = 1 }, { frequency_hz = 70, min = -1 }]\n"),
        at(18, 8,
           "in [[requirement]] mask: found a single max, expected at least two, for the limit runs from "
           "point "
           "to point"));
}

TEST(DeviceProfileRefusalsTest, RefusesAMaskBeyondTheSweep) {
    const std::string points =
        "mask = [{ frequency_hz = 5, min = -1 }, { frequency_hz = 20000, min = -1 }]\n";
    EXPECT_EQ(
        said_after(masked + points),
        at(18, 8,
           "in [[requirement]] mask: found a point at 5 Hz, expected 10 Hz or more, where the sweep begins"));
    EXPECT_EQ(
        said_after(with(masked, "\"response\"", "\"response\"\nfrom_hz = 4\nto_hz = 15000") + points),
        at(20, 8,
           "in [[requirement]] mask: found a point at 20000 Hz, expected 15000 Hz or less, where the sweep "
           "ends"));
    EXPECT_EQ(said_after(with(masked, "\"response\"", "\"response\"\nfrom_hz = 5\nto_hz = 20000") + points),
              "accepted");
}

TEST(DeviceProfileRefusalsTest, RefusesToMixUpFiguresAndCurves) {
    EXPECT_EQ(
        said_after(masked + "min = 3\n"),
        at(18, 7, "in [[requirement]] min: found one limit for the curve 'magnitude', expected a mask"));
    EXPECT_EQ(said_after(masked), at(16, 1,
                                     "in [[requirement]] mask: found nothing, expected a list such as [{ "
                                     "frequency_hz = 20, min = -1.0, "
                                     "max = 0.5 }, ...]"));
    EXPECT_EQ(
        said_with("min = 39.5\nmax = 40.5",
                  "mask = [{ frequency_hz = 50, min = -1 }, { frequency_hz = 70, min = -1 }]"),
        at(12, 8, "in [[requirement]] mask: found a mask for the single figure 'gain', expected min or max"));
}

TEST(DeviceProfileRefusalsTest, RefusesASimulatedUnitThatDoesNotFitTheSettings) {
    EXPECT_EQ(
        said_after("[simulated_unit]\ngain_db = { \"4 dB\" = 40 }\n"),
        at(15, 11,
           "in [simulated_unit] gain_db: found the setting '4 dB', expected a declared [[setting]]; did you "
           "mean '40 dB'?"));
    EXPECT_EQ(
        said(with(small, "[[plan]]\n", "[[setting]]\nname = \"60 dB\"\n[[plan]]\nsetting = \"40 dB\"\n") +
             "[simulated_unit]\ngain_db = { \"40 dB\" = 40 }\n"),
        at(18, 11,
           "in [simulated_unit] gain_db: found no gain for the setting '60 dB', expected one for each "
           "[[setting]]"));
    EXPECT_EQ(said_after("[simulated_unit]\npolarity = 0\n"),
              at(15, 12, "in [simulated_unit] polarity: found 0, expected 1 (upright) or -1 (inverted)"));
    EXPECT_EQ(
        said_after("[simulated_unit]\ngain_db = {}\n"),
        at(15, 11,
           "in [simulated_unit] gain_db: found no gain, expected one for each setting, such as { \"40 dB\" = "
           "40.0 }"));
}

TEST(DeviceProfileRefusalsTest, NamesAFileThatIsMissingAFolderOrEmpty) {
    EXPECT_THAT(refusal([] { read_device_profile("nowhere/unit.toml"); }),
                testing::HasSubstr("nowhere/unit.toml"));
    EXPECT_THAT(refusal([] { read_device_profile(COLDPIN_SOURCE_DIR); }), testing::HasSubstr("folder"));
    EXPECT_THAT(said(""), testing::StartsWith("unit.toml:1:1: schema: found nothing"));
}

}  // namespace
}  // namespace coldpin::profile
