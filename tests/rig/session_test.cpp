#include "coldpin/rig/session.h"

#include <thread>

#include <gmock/gmock.h>
#include <gtest/gtest.h>

#include "coldpin/units/error.h"

#include "kit/signals.h"

namespace coldpin::rig {
namespace {

using testing::HasSubstr;

Setup bench() {
    Setup setup;
    setup.name = "test bench";
    setup.routing.common_mode_output = 2;
    setup.routing.reference_input = 2;
    setup.fixture.differential_loss_db = 40.0;
    setup.fixture.differential_loss_uncertainty_db = 0.03;
    setup.limits.max_preamp_input_dbu = -25.0;
    setup.limits.max_preamp_output_dbu = 15.0;
    setup.calibration = Calibration{18.0, 0.04, std::nullopt, 18.0, 0.05, 18.0, "", ""};
    return setup;
}

CaptureRequest tone(double drive_dbu = -36.0) {
    CaptureRequest request;
    request.label = "tone";
    request.stimulus.kind = signal::Tone{997.0};
    request.drive_dbu = drive_dbu;
    request.expected_gain_db = 40.0;
    return request;
}

Capture take(const Setup& setup, CaptureRequest request, const std::atomic<bool>* stop = nullptr) {
    Session session(setup, open_backend(setup), stop);
    request.wiring = session.wiring_for(request.feed, "", "");
    EXPECT_TRUE(session.prepare(request.wiring));
    return session.capture(request);
}

template <typename Refusal>
std::string refusal(const Setup& setup, const CaptureRequest& request) {
    try {
        take(setup, request);
    } catch (const Refusal& error) {
        return error.what();
    }
    return "";
}

TEST(SessionTest, ACaptureCarriesAllThatMeasuringNeeds) {
    const Capture capture = take(bench(), tone());
    const auto& description = capture.description;
    EXPECT_EQ(capture.takes, 1);
    EXPECT_EQ(capture.recording.channels.size(), 2U);
    EXPECT_NEAR(description.stimulus->level_dbfs, -36.0 + 40.0 - 18.0, 1e-12);
    EXPECT_EQ(description.feed, "differential");
    EXPECT_EQ(description.drive_dbu, -36.0);
    EXPECT_NEAR(*description.drive_uncertainty_db, std::hypot(0.04, 0.03), 1e-12);
    EXPECT_EQ(description.input_full_scale_dbu, 18.0);
    EXPECT_EQ(description.device_channel, 1);
    EXPECT_EQ(description.reference_channel, 2);
    // Float32 bits survive.
    for (double x : capture.recording.channels[0]) ASSERT_EQ(x, static_cast<double>(static_cast<float>(x)));
}

TEST(SessionTest, NoLimitIsEverExceededAndNothingIsPlayedThen) {
    EXPECT_THAT(refusal<UsageError>(bench(), tone(-24.9)), HasSubstr("-24.9 dBu at the preamp's input"));
    auto loud_out = tone(-26.0);
    loud_out.expected_gain_db = 45.0;
    EXPECT_THAT(refusal<UsageError>(bench(), loud_out), HasSubstr("preamp's output"));
    // A multitone counts by its peak.
    auto many = tone(-27.0);
    many.stimulus.kind = signal::Multitone{{100.0, 1000.0, 5000.0, 9000.0}};
    EXPECT_THAT(refusal<UsageError>(bench(), many), HasSubstr("preamp's input"));
    rig::Setup wide = bench();
    wide.limits = {};
    EXPECT_THAT(refusal<UsageError>(wide, tone(-20.0)), HasSubstr("needs +2.0 dBFS"));
    rig::Setup uncalibrated = bench();
    uncalibrated.calibration.reset();
    EXPECT_THAT(refusal<UsageError>(uncalibrated, tone()), HasSubstr("not calibrated"));
}

TEST(SessionTest, ADamagedTakeIsTakenAgain) {
    for (auto damage : {&SimulatedFaults::lose_frames_in_takes, &SimulatedFaults::repeat_frames_in_takes,
                        &SimulatedFaults::zero_frames_in_takes}) {
        rig::Setup setup = bench();
        setup.simulated.faults.*damage = {1, 2};
        const Capture capture = take(setup, tone());
        EXPECT_EQ(capture.takes, 3) << (damage == &SimulatedFaults::repeat_frames_in_takes)
                                    << (damage == &SimulatedFaults::zero_frames_in_takes)
                                    << (capture.description.remarks.empty() ? ""
                                                                            : capture.description.remarks[0]);
        EXPECT_EQ(capture.description.remarks.size(), 2U);
    }
}

TEST(SessionTest, FourDamagedTakesInARowAreAReason) {
    rig::Setup setup = bench();
    setup.simulated.faults.lose_frames_in_takes = {1, 2, 3, 4, 5, 6};
    EXPECT_THAT(refusal<CannotMeasure>(setup, tone()),
                testing::AllOf(HasSubstr("4 takes in a row were damaged"), HasSubstr("lost")));
}

TEST(SessionTest, ADeadInputIsNamed) {
    rig::Setup setup = bench();
    setup.simulated.faults.unplugged = true;
    EXPECT_THAT(refusal<CannotMeasure>(setup, tone()), HasSubstr("dead"));
}

TEST(SessionTest, AClippingInputSaysWhatToTurnDown) {
    rig::Setup setup = bench();
    setup.simulated.interface.input_full_scale_dbu = 0.0;
    EXPECT_THAT(refusal<InputClipped>(setup, tone()), HasSubstr("turn its input gain down"));
}

TEST(SessionTest, OneOutputNeedsItsPlugMoved) {
    rig::Setup setup = bench();
    setup.routing.common_mode_output.reset();
    const Session session(setup, open_backend(setup));
    EXPECT_EQ(session.wiring_for(Feed::differential, "", "").plug, Plug::differential_pad);
    EXPECT_EQ(session.wiring_for(Feed::common_mode, "", "").plug, Plug::common_mode_feed);
    const Session two(bench(), open_backend(bench()));
    EXPECT_EQ(two.wiring_for(Feed::common_mode, "", "").plug, Plug::both);
}

TEST(SessionTest, AStopEndsARealTimeCaptureAtOnce) {
    rig::Setup setup = bench();
    setup.simulated.real_time = true;
    std::atomic<bool> stop{false};
    std::thread stopper([&] {
        std::this_thread::sleep_for(std::chrono::milliseconds(200));
        stop = true;
    });
    const auto begin = std::chrono::steady_clock::now();
    auto request = tone();
    request.stimulus.length_s = 5.0;
    EXPECT_THROW(take(setup, request, &stop), CannotMeasure);
    EXPECT_LT(std::chrono::duration<double>(std::chrono::steady_clock::now() - begin).count(), 1.5);
    stopper.join();
}

TEST(SessionTest, UnpreparedWiringIsRefused) {
    Session session(bench(), open_backend(bench()));
    EXPECT_THROW(session.capture(tone()), UsageError);
}

// Raw samples and tones for a meter pass the same limit as every capture; in a loop there is no preamp to
// protect.
TEST(SessionTest, RawSamplesAndTonesKeepTheLimits) {
    const rig::Setup setup = bench();  // -25 dBu at the preamp behind 40 dB: -3 dBFS of 18 dBu
    Session session(setup, open_backend(setup));
    ASSERT_TRUE(session.prepare(session.wiring_for(Feed::differential, "", "")));
    const std::vector<double> below(4800, 0.7), above(4800, 0.75);
    EXPECT_NO_THROW(session.play_raw(1, below, 1));
    EXPECT_THROW(session.play_raw(1, above, 1), UsageError);
    std::atomic<bool> stop{false};
    EXPECT_NO_THROW(session.play_tone_until(stop, 1, 220.0, -3.1));
    EXPECT_THROW(session.play_tone_until(stop, 1, 220.0, -2.9), UsageError);
    EXPECT_THROW(session.check_path(-2.0), UsageError);
    ASSERT_TRUE(session.prepare({Plug::loop_differential, "", ""}));
    EXPECT_NO_THROW(session.play_raw(1, above, 1));
}

}  // namespace
}  // namespace coldpin::rig
