#include "coldpin/check/single_measurement.h"

#include <gmock/gmock.h>
#include <gtest/gtest.h>

#include "coldpin/units/error.h"

namespace coldpin::check {
namespace {

const std::string profiles = std::string(COLDPIN_SOURCE_DIR) + "/profiles/";

TEST(SingleMeasurementTest, NoiseBringsItsGainAlong) {
    const auto device = profile::read_device_profile(profiles + "devices/saltmarsh-s4.toml");
    SingleMeasurement wanted;
    wanted.kind = "noise";
    const auto plan = profile_for(wanted, &device);
    ASSERT_EQ(plan.plan.size(), 2U);
    EXPECT_EQ(plan.plan[0].measure, "gain");
    EXPECT_EQ(plan.plan[1].setting, "60 dB");  // where the profile measures noise
    EXPECT_EQ(plan.plan[0].setting, "60 dB");
    EXPECT_TRUE(plan.requirements.empty());
}

TEST(SingleMeasurementTest, WithoutAProfileTheDriveIsHarmless) {
    SingleMeasurement wanted;
    wanted.kind = "gain";
    EXPECT_EQ(profile_for(wanted, nullptr).plan.at(0).drive_dbu, -60.0);
    wanted.nominal_gain_db = 40.0;
    EXPECT_FALSE(profile_for(wanted, nullptr).plan.at(0).drive_dbu.has_value());
}

TEST(SingleMeasurementTest, UnknownWordsNameTheNearest) {
    const auto device = profile::read_device_profile(profiles + "devices/saltmarsh-s4.toml");
    const auto message = [&](const std::string& kind, const std::string& setting) -> std::string {
        try {
            SingleMeasurement wanted;
            wanted.kind = kind;
            wanted.setting = setting;
            profile_for(wanted, &device);
        } catch (const UsageError& error) {
            return error.what();
        }
        return "";
    };
    EXPECT_THAT(message("nosie", ""), testing::HasSubstr("noise"));
    EXPECT_THAT(message("noise", "60dB"), testing::HasSubstr("'60 dB'"));
}

}  // namespace
}  // namespace coldpin::check
