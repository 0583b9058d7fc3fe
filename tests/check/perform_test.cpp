#include "coldpin/check/perform.h"

#include <ctime>

#include <gmock/gmock.h>
#include <gtest/gtest.h>

#include "coldpin/units/error.h"

namespace coldpin::check {
namespace {

using testing::ElementsAre;
using testing::HasSubstr;

const std::string profiles = std::string(COLDPIN_SOURCE_DIR) + "/profiles/";

class QuietBench : public Bench {
  public:
    void ask(const std::string& instruction) override { asked.push_back(instruction); }
    void progress(const std::string&, std::size_t, std::size_t) override {}
    std::vector<std::string> asked;
};

// Hides that the simulated rig could rewire itself: a person is asked, as on a real one.
class HandBackend : public rig::Backend {
  public:
    explicit HandBackend(const rig::Setup& setup) : inner_(rig::open_backend(setup)) {}
    rig::Take play_and_record(const rig::TakeRequest& request, const std::atomic<bool>* stop) override {
        ++takes;
        inner_->rewire(wiring);
        return inner_->play_and_record(request, stop);
    }
    bool rewire(const rig::Wiring& wanted) override {
        wiring = wanted;
        return false;
    }
    std::string description() const override { return "by hand"; }
    rig::Wiring wiring;
    int takes = 0;

  private:
    std::unique_ptr<rig::Backend> inner_;
};

Run run_on(profile::RigFile rig, const profile::DeviceProfile& device, QuietBench& bench,
           bool by_hand = false) {
    if (device.simulated && !rig.setup.simulated.preamp) rig.setup.simulated.preamp = device.simulated;
    rig::Session session(rig.setup,
                         by_hand ? std::make_unique<HandBackend>(rig.setup) : rig::open_backend(rig.setup));
    return perform(device, rig, session, bench, {"0", "2026-01-01T00:00:00Z", "1", "", "", {}});
}

TEST(PerformTest, AHealthyUnitPassesWithTheTruthInsideEveryUncertainty) {
    const auto device = profile::read_device_profile(profiles + "devices/fennmark-pl2.toml");
    QuietBench bench;
    [[maybe_unused]] const std::clock_t before = std::clock();
    const check::Run run = run_on(profile::read_rig("simulated"), device, bench);
    [[maybe_unused]] const double cpu_s = static_cast<double>(std::clock() - before) / CLOCKS_PER_SEC;
    EXPECT_EQ(run.verdict, Verdict::pass);
    EXPECT_TRUE(bench.asked.empty());
#ifndef COLDPIN_SANITIZED  // instrumented code takes its time
    // Three seconds by the clock on the wall are asked; tests that run beside this one must not count.
    EXPECT_LT(cpu_s, 3.0);
#endif
    for (const auto& step : run.steps) {
        EXPECT_EQ(step.failure, "");
        if (const auto* gain = step.findings.figure("gain")) {
            EXPECT_NEAR(gain->value, device.simulated->gain_db_by_setting.begin()->second, gain->uncertainty);
        }
        if (const auto* rejection = step.findings.figure("common_mode_rejection", {{"frequency_hz", 85.0}})) {
            EXPECT_NEAR(rejection->value, device.simulated->rejection_db, rejection->uncertainty + 0.01);
        }
    }
}

TEST(PerformTest, AnalysingAgainGivesTheSameFindingsAndVerdicts) {
    const auto device = profile::read_device_profile(profiles + "devices/saltmarsh-s4.toml");
    QuietBench bench;
    check::Run run = run_on(profile::read_rig("simulated"), device, bench);
    const check::Run before = run;
    analyse_again(run);
    ASSERT_EQ(run.steps.size(), before.steps.size());
    for (std::size_t i = 0; i < run.steps.size(); ++i)
        EXPECT_EQ(run.steps[i].findings, before.steps[i].findings);
    EXPECT_EQ(run.verdict, before.verdict);
}

TEST(PerformTest, TwoOutputsNeedNoHandAndOneOutputTheFewest) {
    const auto device = profile::read_device_profile(profiles + "devices/fennmark-pl2.toml");
    QuietBench two, one;
    EXPECT_EQ(run_on(profile::read_rig("simulated"), device, two, true).verdict, Verdict::pass);
    EXPECT_TRUE(two.asked.empty());
    EXPECT_EQ(
        run_on(profile::read_rig(profiles + "rigs/simulated-one-output.toml"), device, one, true).verdict,
        Verdict::pass);
    EXPECT_THAT(
        one.asked,
        ElementsAre(
            "Move the plug of interface output 1 from the differential pad to the common-mode feed."));
}

TEST(PerformTest, SettingsAndPlugsChangeAsSeldomAsPossible) {
    // Two settings, each with rejection: the second begins where the plug is.
    const auto device = profile::device_profile_from_text(R"(
schema = "coldpin-device/1"
name = "two steps"
[[setting]]
name = "low"
nominal_gain_db = 30.0
[[setting]]
name = "high"
nominal_gain_db = 40.0
[[plan]]
measure = "cmrr"
setting = "low"
[[plan]]
measure = "gain"
setting = "low"
[[plan]]
measure = "cmrr"
setting = "high"
[[plan]]
measure = "noise"
setting = "high"
[[plan]]
measure = "gain"
setting = "high"
)",
                                                          "two.toml");
    const auto rig = profile::read_rig(profiles + "rigs/simulated-one-output.toml");
    const rig::Session session(rig.setup, rig::open_backend(rig.setup));
    const CapturePlan plan = plan_captures(device, session);
    EXPECT_THAT(plan.changes,
                ElementsAre(HasSubstr("to the common-mode feed"), HasSubstr("gain control to 'high'"),
                            HasSubstr("to the differential pad")));
    // Gain comes before the noise that refers to it.
    std::size_t gain = 0, idle = 0;
    for (std::size_t i = 0; i < plan.captures.size(); ++i) {
        if (plan.captures[i].request.label == "gain-high") gain = i;
        if (plan.captures[i].request.label == "idle-high") idle = i;
    }
    EXPECT_LT(gain, idle);
}

TEST(PerformTest, StepsShareTheirCaptures) {
    const auto device = profile::read_device_profile(profiles + "devices/fennmark-pl2.toml");
    const auto rig = profile::read_rig("simulated");
    const rig::Session session(rig.setup, rig::open_backend(rig.setup));
    const CapturePlan plan = plan_captures(device, session);
    // gain, sweep (response, polarity, latency), the differential and common-mode tones, idle (noise and
    // hum).
    EXPECT_EQ(plan.captures.size(), 5U);
    EXPECT_EQ(plan.steps.size(), device.plan.size());
}

TEST(PerformTest, ALimitIsHeldBeforeAnythingIsPlayed) {
    auto device = profile::read_device_profile(profiles + "devices/fennmark-pl2.toml");
    for (auto& step : device.plan)
        if (step.measure == "cmrr") step.common_mode_drive_dbu = 12.0;
    const auto rig = profile::read_rig("simulated");
    auto backend = std::make_unique<HandBackend>(rig.setup);
    const HandBackend& hand = *backend;
    rig::Session session(rig.setup, std::move(backend));
    QuietBench bench;
    EXPECT_THROW(perform(device, rig, session, bench, {}), UsageError);
    EXPECT_EQ(hand.takes, 0);
}

TEST(PerformTest, AnOpenColdLegIsSeenInGainAndRejection) {
    const auto device = profile::read_device_profile(profiles + "devices/fennmark-pl2.toml");
    QuietBench bench;
    const check::Run run =
        run_on(profile::read_rig(profiles + "rigs/simulated-cold-leg-open.toml"), device, bench);
    EXPECT_EQ(run.verdict, Verdict::fail);
    EXPECT_FALSE(run.cautions.empty());  // the common-mode drive was lowered
    for (const auto& step : run.steps) {
        if (const auto* gain = step.findings.figure("gain")) {
            EXPECT_NEAR(gain->value, device.simulated->gain_db_by_setting.begin()->second - 6.02, 0.1);
        }
        // Half the drive arrives differentially, all of the common mode does: 0.5.
        if (const auto* rejection = step.findings.figure("common_mode_rejection")) {
            EXPECT_NEAR(rejection->value, -6.02, 0.2);
        }
    }
}

TEST(PerformTest, ANoisyInterfaceLeavesNoiseUndecidedRatherThanFailed) {
    const auto device = profile::read_device_profile(profiles + "devices/saltmarsh-s4.toml");
    QuietBench bench;
    auto rig = profile::read_rig(profiles + "rigs/simulated-noisy-interface.toml");
    rig.setup.simulated.interface.input_noise_dbfs = -70.0;
    const check::Run run = run_on(rig, device, bench);
    for (const auto& judgement : run.judgements)
        if (judgement.requirement.quantity == "noise_input_referred") {
            EXPECT_EQ(judgement.verdict, Verdict::undecided) << judgement.sentence;
        }
}

TEST(PerformTest, BothChannelsOfAUnitAreMeasuredAndJudged) {
    const auto device = profile::read_device_profile(profiles + "devices/harrowgill-duo.toml");
    QuietBench bench;
    const check::Run run = run_on(profile::read_rig("simulated"), device, bench);
    EXPECT_EQ(run.judgements.size(), 2 * device.requirements.size());
    std::vector<double> gains;
    for (const auto& step : run.steps)
        if (const auto* gain = step.findings.figure("gain")) gains.push_back(gain->value);
    ASSERT_EQ(gains.size(), 2U);
    EXPECT_NEAR(gains[1] - gains[0], device.simulated->second_channel_gain_offset_db, 0.005);
}

}  // namespace
}  // namespace coldpin::check
