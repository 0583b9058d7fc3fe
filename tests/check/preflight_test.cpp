// Wiring faults, each provoked in the pretended bench, in random ones; and sound ones that must pass.
#include "coldpin/check/preflight.h"

#include <functional>
#include <random>

#include <gmock/gmock.h>
#include <gtest/gtest.h>

#include "coldpin/check/perform.h"
#include "coldpin/units/error.h"

#include "kit/nobody.h"

namespace coldpin::check {
namespace {

using testing::HasSubstr;
using Faults = rig::SimulatedFaults;

const profile::DeviceProfile& device() {
    static const auto profile =
        profile::read_device_profile(std::string(COLDPIN_SOURCE_DIR) + "/profiles/devices/saltmarsh-s4.toml");
    return profile;
}

// A rig as they come, on the first setting of a unit with several.
rig::Setup random_rig(unsigned seed) {
    std::mt19937 random(seed);
    const auto between = [&](double low, double high) {
        return std::uniform_real_distribution<double>(low, high)(random);
    };
    rig::Setup setup = profile::read_rig("simulated").setup;
    setup.simulated.seed = seed;
    setup.simulated.preamp = device().simulated;
    auto& interface = setup.simulated.interface;
    interface.input_noise_dbfs = between(-116.0, -100.0);
    interface.output_noise_dbfs = between(-118.0, -104.0);
    interface.latency_frames = between(60.0, 2200.0);
    interface.ac_corner_hz = between(0.5, 6.0);
    interface.ground_loop_hum_dbfs = between(-125.0, -100.0);
    return setup;
}

WiringReport looked_at(const rig::Setup& setup, const std::string& setting) {
    rig::Session session(setup, rig::open_backend(setup));
    session.prepare(session.wiring_for(rig::Feed::differential, setting, ""));
    return preflight(session, device(), setting, setup.routing.device_inputs.front());
}

std::string all_of(const WiringReport& report) {
    std::string text;
    for (const auto& finding : report.findings)
        text += wiring_fault_name(finding.fault) + ": " + finding.sentence + "\n";
    return text;
}

void expect_found(WiringFault fault, bool spoils, const std::function<void(rig::Setup&)>& make,
                  const std::string& setting = "") {
    const std::string where = setting.empty() ? device().settings.front().name : setting;
    for (unsigned seed = 1; seed <= 20; ++seed) {
        rig::Setup setup = random_rig(seed);
        make(setup);
        const auto report = looked_at(setup, where);
        const auto* finding = report.finding(fault);
        ASSERT_NE(finding, nullptr) << wiring_fault_name(fault) << ", seed " << seed << ": "
                                    << all_of(report);
        EXPECT_EQ(finding->spoils, spoils);
        EXPECT_EQ(report.findings.size(), 1U) << all_of(report);
    }
}
void expect_found(WiringFault fault, bool spoils, const std::function<void(Faults&)>& make) {
    expect_found(fault, spoils,
                 std::function<void(rig::Setup&)>([&](rig::Setup& setup) { make(setup.simulated.faults); }));
}

TEST(PreflightTest, SoundBenchesPass) {
    for (unsigned seed = 1; seed <= 60; ++seed)
        for (const auto& setting : device().settings) {
            const auto report = looked_at(random_rig(seed), setting.name);
            EXPECT_TRUE(report.findings.empty()) << seed << " " << setting.name << ": " << all_of(report);
            ASSERT_TRUE(report.gain_db.has_value());
            EXPECT_NEAR(*report.gain_db, *setting.nominal_gain_db, 1.0);
            EXPECT_EQ(report.polarity, 1);
        }
}

TEST(PreflightTest, EachFaultIsNamed) {
    expect_found(WiringFault::input_dead, true, [](Faults& f) { f.unplugged = true; });
    expect_found(WiringFault::leg_open, false, [](Faults& f) { f.cold_leg_open = true; });
    expect_found(WiringFault::legs_swapped, false, [](Faults& f) { f.legs_swapped = true; });
    expect_found(WiringFault::wrong_pad, false, [](Faults& f) { f.pad_error_db = 20.0; });
    expect_found(WiringFault::wrong_socket, true, [](Faults& f) { f.output_in_reference = true; });
    expect_found(WiringFault::gain_off, false, [](Faults& f) { f.gain_error_db = -4.2; });
    expect_found(WiringFault::feed_not_reaching, true, [](Faults& f) { f.dead_output = 1; });
}

// Where the unit's own noise stands over the interface's, silence tells more.
TEST(PreflightTest, AtHighGainTheUnitsNoiseTellsWhereItBreaks) {
    const std::string highest = device().settings.back().name;
    const auto quiet = [](const std::function<void(Faults&)>& make) {
        return [make](rig::Setup& setup) {
            setup.simulated.interface.input_noise_dbfs = -114.0;
            make(setup.simulated.faults);
        };
    };
    expect_found(WiringFault::feed_not_reaching, true, quiet([](Faults& f) { f.feed_not_reaching = true; }),
                 highest);
    expect_found(WiringFault::unit_silent, true, quiet([](Faults& f) { f.unit_off = true; }), highest);
    expect_found(WiringFault::unit_silent, true, quiet([](Faults& f) { f.output_not_connected = true; }),
                 highest);
}

// Where it hides, both causes are named and neither is guessed.
TEST(PreflightTest, ThinEvidenceNamesAllCauses) {
    rig::Setup setup = random_rig(3);
    setup.simulated.interface.input_noise_dbfs = -85.0;
    setup.simulated.faults.feed_not_reaching = true;
    const auto report = looked_at(setup, device().settings.front().name);
    ASSERT_EQ(report.findings.size(), 1U);
    EXPECT_THAT(report.findings[0].sentence, HasSubstr("cannot be told which"));
    // Without a common-mode feed, 6 dB are 6 dB.
    rig::Setup one =
        profile::read_rig(std::string(COLDPIN_SOURCE_DIR) + "/profiles/rigs/simulated-one-output.toml").setup;
    one.simulated.preamp = device().simulated;
    one.simulated.faults.cold_leg_open = true;
    const auto low = looked_at(one, device().settings.front().name);
    ASSERT_EQ(low.findings.size(), 1U) << all_of(low);
    EXPECT_EQ(low.findings[0].fault, WiringFault::gain_off);
    EXPECT_THAT(low.findings[0].sentence, HasSubstr("cannot be told"));
}

TEST(PreflightTest, TheGainOfAnotherSettingIsNamed) {
    const auto& settings = device().settings;
    ASSERT_GE(settings.size(), 2U);
    const double step_db = *settings[1].nominal_gain_db - *settings[0].nominal_gain_db;
    for (unsigned seed = 1; seed <= 20; ++seed) {
        rig::Setup setup = random_rig(seed);
        setup.simulated.faults.gain_error_db = step_db;
        const auto report = looked_at(setup, settings[0].name);
        ASSERT_NE(report.finding(WiringFault::wrong_setting), nullptr) << all_of(report);
        EXPECT_THAT(report.findings[0].sentence, HasSubstr("'" + settings[1].name + "'"));
    }
}

TEST(PreflightTest, TooLoudIsSaidBeforeAnythingElse) {
    expect_found(WiringFault::too_loud, true, std::function<void(rig::Setup&)>([](rig::Setup& setup) {
                     setup.simulated.interface.input_full_scale_dbu = -30.0;
                 }));
}

TEST(PreflightTest, MoreRejectionThanTheFixtureShowsIsNoRejection) {
    expect_found(WiringFault::common_mode_not_reaching, false,
                 std::function<void(rig::Setup&)>([](rig::Setup& setup) {
                     setup.fixture.rejection_limit_db = 60.0;
                     setup.simulated.faults.common_mode_dead = true;
                 }));
}

TEST(PreflightTest, ARunSaysOrRefuses) {
    tests::Nobody nobody;
    auto rig = profile::read_rig("simulated");
    rig.setup.simulated.preamp = device().simulated;
    const auto run = [&](const std::function<void(Faults&)>& make, const RunDetails& details = {}) {
        auto faulty = rig;
        make(faulty.setup.simulated.faults);
        rig::Session session(faulty.setup, rig::open_backend(faulty.setup));
        return perform(device(), faulty, session, nobody, details);
    };
    EXPECT_THROW(run([](Faults& f) { f.unit_off = true; }), CannotMeasure);
    EXPECT_THROW(run([](Faults& f) { f.resample_to_hz = 44100.0; }), CannotMeasure);
    EXPECT_THROW(run([](Faults& f) { f.output_moved_db = 0.2; }), CannotMeasure);
    RunDetails accepting;
    accepting.accept_path = true;
    const auto accepted = run([](Faults& f) { f.output_moved_db = 0.2; }, accepting);
    EXPECT_THAT(accepted.cautions, testing::Contains(HasSubstr("a knob was moved")));
    const auto swapped = run([](Faults& f) { f.legs_swapped = true; });
    EXPECT_THAT(swapped.cautions, testing::Contains(HasSubstr("upside down")));
    EXPECT_EQ(swapped.verdict, Verdict::fail);
}

// Two clocks 40 ppm apart: measured, corrected, said; every figure as with one clock.
TEST(PreflightTest, SteadyClocksThatDifferAreCorrected) {
    tests::Nobody nobody;
    auto rig = profile::read_rig("simulated");
    rig.setup.simulated.preamp = device().simulated;
    const auto run = [&](double ppm) {
        auto other = rig;
        other.setup.simulated.faults.clock_ppm = ppm;
        rig::Session session(other.setup, rig::open_backend(other.setup));
        return perform(device(), other, session, nobody, {});
    };
    const auto one = run(0.0), two = run(40.0);
    EXPECT_THAT(two.cautions, testing::Contains(HasSubstr("different clocks")));
    EXPECT_TRUE(one.cautions.empty());
    EXPECT_EQ(two.verdict, one.verdict);
    ASSERT_TRUE(two.captures.front().take.description.clock_ppm.has_value());
    EXPECT_NEAR(*two.captures.front().take.description.clock_ppm, 40.0, 0.3);
    for (std::size_t k = 0; k < one.steps.size(); ++k) {
        const auto* a = one.steps[k].findings.curve("magnitude");
        const auto* b = two.steps[k].findings.curve("magnitude");
        if (a == nullptr || b == nullptr) continue;
        ASSERT_EQ(a->y.size(), b->y.size());
        for (std::size_t n = 0; n < a->y.size(); ++n)
            if (a->x[n] >= 20.0 && a->x[n] <= 20000.0) {
                EXPECT_NEAR(a->y[n], b->y[n], 0.02) << a->x[n];
            }
    }
}

}  // namespace
}  // namespace coldpin::check
