#include "coldpin/signal/description.h"

#include <gmock/gmock.h>
#include <gtest/gtest.h>

#include "coldpin/units/error.h"

namespace coldpin::signal {
namespace {

using testing::HasSubstr;

std::string refusal(const std::string& text) {
    try {
        description_from_json_text(text, "take.json");
    } catch (const UsageError& error) {
        return error.what();
    }
    return "";
}

TEST(DescriptionTest, EveryMemberComesBackBitForBit) {
    for (const StimulusKind& kind :
         {StimulusKind(Tone{997.0000000001}), StimulusKind(Multitone{{1.0 / 3.0 * 300.0, 9973.0}}),
          StimulusKind(Sweep{8.0, 22000.0}), StimulusKind(Silence{}), StimulusKind(Burst{5000.0, 25})}) {
        Description description;
        Stimulus stimulus;
        stimulus.kind = kind;
        stimulus.length_s = 1.0 + 1e-15 * 3;
        stimulus.level_dbfs = -20.1 / 3.0;
        description.stimulus = stimulus;
        description.feed = "differential";
        description.setting = "40 dB \"hot\"";
        description.unit_channel = "left";
        description.device_channel = 1;
        description.reference_channel = 2;
        description.input_full_scale_dbu = 18.0 / 7.0;
        description.input_uncertainty_db = 0.1;
        description.drive_dbu = -36.123456789012345;
        description.drive_uncertainty_db = 1e-300;
        description.gain_db = 40.06931234567891;
        description.gain_uncertainty_db = 0.08;
        description.source_ohms = 148.5;
        description.temperature_c = 21.0;
        description.rejection_limit_db = 110.0;
        description.remarks = {"take 1 was damaged: ü", "second\nline"};
        EXPECT_EQ(description_from_json_text(to_json_text(description), "x"), description);
    }
    EXPECT_EQ(description_from_json_text(to_json_text(Description{}), "x"), Description{});
}

TEST(DescriptionTest, WhatANewerVersionAddedIsPassedOver) {
    EXPECT_EQ(description_from_json_text(R"({"schema": "coldpin-recording/1", "moon": "full"})", "x"),
              Description{});
}

TEST(DescriptionTest, DamageIsNamedByFileAndMember) {
    EXPECT_THAT(refusal("{"), HasSubstr("take.json"));
    EXPECT_THAT(refusal("[]"), HasSubstr("take.json"));
    EXPECT_THAT(refusal("{}"), HasSubstr("schema"));
    EXPECT_THAT(refusal(R"({"schema": "other/1"})"), HasSubstr("other/1"));
    EXPECT_THAT(refusal(R"({"schema": "coldpin-recording/1", "drive_dbu": "loud"})"), HasSubstr("drive_dbu"));
    EXPECT_THAT(refusal(R"({"schema": "coldpin-recording/1", "stimulus": {"kind": "chirp"}})"),
                HasSubstr("chirp"));
    EXPECT_THAT(
        refusal(R"({"schema": "coldpin-recording/1", "stimulus": {"kind": "tone", "frequency_hz": 997}})"),
        HasSubstr("length_s"));
    EXPECT_THAT(
        refusal(
            R"({"schema": "coldpin-recording/1", "stimulus": {"kind": "tone", "frequency_hz": 99700, "length_s": 1, "level_dbfs": 0, "rate_hz": 48000, "fade_s": 0}})"),
        HasSubstr("99700"));
}

TEST(DescriptionTest, LiesBesideItsRecording) {
    EXPECT_EQ(description_path("a/b.take.wav"), std::filesystem::path("a/b.take.json"));
}

}  // namespace
}  // namespace coldpin::signal
