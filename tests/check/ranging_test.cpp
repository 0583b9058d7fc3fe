#include "coldpin/check/ranging.h"

#include <cmath>

#include <gmock/gmock.h>
#include <gtest/gtest.h>

#include "coldpin/check/perform.h"
#include "coldpin/units/error.h"

#include "kit/nobody.h"

namespace coldpin::check {
namespace {

using testing::HasSubstr;

rig::Setup bench(double gain_db) {
    rig::Setup setup = profile::read_rig("simulated").setup;
    setup.limits = {};
    setup.limits.max_preamp_input_dbu = 0.0;
    rig::SimulatedPreamp preamp;
    preamp.gain_db_by_setting = {{"", gain_db}};
    preamp.max_output_dbu = 30.0;
    setup.simulated.preamp = preamp;
    return setup;
}

DriveRange found(const rig::Setup& setup, double start_dbu) {
    rig::Session session(setup, rig::open_backend(setup));
    session.prepare(session.wiring_for(rig::Feed::differential, "", ""));
    return find_drive(session, 1, start_dbu);
}

TEST(RangingTest, TheInterfacesInputLimits) {
    for (double gain : {41.0, 50.0, 65.0}) {
        const auto range = found(bench(gain), -20.0 - gain);
        EXPECT_NEAR(range.output_dbu, 18.0 - 3.0, 0.1) << gain;
        EXPECT_LE(range.captures, 4);
        EXPECT_THAT(range.limited_by, HasSubstr("interface's input"));
    }
}

TEST(RangingTest, TheUnitLimitsWithMargin) {
    for (double most_dbu : {-2.0, 4.0, 9.0}) {
        auto setup = bench(40.0);
        setup.simulated.preamp->max_output_dbu = most_dbu;
        const auto range = found(setup, -65.0);
        EXPECT_LE(range.captures, 4);
        EXPECT_LE(range.output_dbu, most_dbu - 0.5) << most_dbu;
        EXPECT_GE(range.output_dbu, most_dbu - 13.0) << most_dbu;
        EXPECT_THAT(range.limited_by, HasSubstr("the unit"));
    }
}

TEST(RangingTest, NoLimitOfTheRigIsExceededOnTheWay) {
    auto setup = bench(20.0);
    setup.limits.max_preamp_input_dbu = -25.0;
    auto range = found(setup, -40.0);
    EXPECT_NEAR(range.drive_dbu, -25.0, 1e-9);
    EXPECT_THAT(range.limited_by, HasSubstr("at the preamp's input"));
    setup = bench(40.0);
    setup.limits.max_preamp_output_dbu = 6.0;
    range = found(setup, -60.0);
    EXPECT_NEAR(range.output_dbu, 6.0, 0.05);
    EXPECT_THAT(range.limited_by, HasSubstr("at the preamp's output"));
    setup.limits.max_preamp_input_dbu = -70.0;
    EXPECT_THROW(found(setup, -60.0), UsageError);
}

TEST(RangingTest, AGainHigherThanThoughtIsComeDownFrom) {
    const auto range = found(bench(60.0), -30.0);  // +30 dBu at the output: clips at once
    EXPECT_LE(range.captures, 4);
    EXPECT_LT(range.output_dbu, 18.0);
    EXPECT_GT(range.output_dbu, -5.0);
}

TEST(RangingTest, SilenceIsNoRange) {
    auto setup = bench(40.0);
    setup.simulated.faults.unit_off = true;
    setup.simulated.interface.leakage_db = -200.0;
    setup.simulated.interface.input_noise_dbfs = -130.0;
    EXPECT_THROW(found(setup, -60.0), CannotMeasure);
}

TEST(RangingTest, WhatTheInterfaceDecidesIsSaidWithTheCure) {
    auto setup = bench(20.0);
    setup.simulated.interface.input_noise_dbfs = -95.0;
    setup.calibration->loop_noise_dbfs = -95.0;
    setup.limits.max_preamp_input_dbu = -25.0;  // so that the input has 20 dB to spare
    const auto range = found(setup, -40.0);
    EXPECT_THAT(range.sentences, testing::Contains(HasSubstr("Turning the interface's input up by 20 dB")));
}

TEST(RangingTest, ARunAtTheFoundLevelAgreesWithOneAtTheUsual) {
    tests::Nobody nobody;
    const auto device =
        profile::read_device_profile(std::string(COLDPIN_SOURCE_DIR) + "/profiles/devices/saltmarsh-s4.toml");
    auto rig = profile::read_rig("simulated");
    rig.setup.simulated.preamp = device.simulated;
    const auto run = [&](bool auto_level) {
        rig::Session session(rig.setup, rig::open_backend(rig.setup));
        RunDetails details;
        details.auto_level = auto_level;
        return perform(device, rig, session, nobody, details);
    };
    const auto usual = run(false), raised = run(true);
    EXPECT_EQ(usual.verdict, raised.verdict);
    ASSERT_EQ(usual.steps.size(), raised.steps.size());
    double most_db = -300.0;
    for (std::size_t k = 0; k < usual.steps.size(); ++k) {
        const auto *a = usual.steps[k].findings.figure("gain"), *b = raised.steps[k].findings.figure("gain");
        if (a == nullptr || b == nullptr) continue;
        EXPECT_NEAR(a->value, b->value, 0.01);
        most_db = std::max(most_db, raised.steps[k].findings.figure("output_level")->value -
                                        usual.steps[k].findings.figure("output_level")->value);
    }
    EXPECT_GT(most_db, 5.0);
}

}  // namespace
}  // namespace coldpin::check
