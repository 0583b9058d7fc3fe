#include "coldpin/check/calibrate.h"

#include <cmath>
#include <random>

#include <fmt/core.h>
#include <gmock/gmock.h>
#include <gtest/gtest.h>

#include "coldpin/units/error.h"
#include "coldpin/units/level.h"

namespace coldpin::check {
namespace {

using testing::HasSubstr;

// Someone with a meter: reads what the pretended output truly makes, with an error inside the meter's
// accuracy, on the range that shows most digits of 1999, and follows advice.
class MeterBench : public Bench {
  public:
    MeterBench(const rig::Setup& truth, double error, double level_dbfs)
        : truth_(truth), error_(error), level_dbfs_(level_dbfs) {}
    void ask(const std::string& instruction) override { asked.push_back(instruction); }
    void progress(const std::string& /*what*/, std::size_t /*step*/, std::size_t /*steps*/) override {}
    std::string answer(const std::string& question) override {
        asked.push_back(question);
        const auto at = question.find("plays at ");
        if (at != std::string::npos) level_dbfs_ = std::stod(question.substr(at + 9));
        double volts =
            units::volts_rms_from_dbu(truth_.simulated.interface.output_full_scale_dbu + level_dbfs_);
        volts *= (1.0 + error_) * scale;
        return volts < range_volts ? fmt::format("{:.3f} V", volts) : fmt::format("{:.2f} V", volts);
    }
    double scale = 1.0;
    double range_volts = 2.0;  // up to here it shows millivolts
    std::vector<std::string> asked;

  private:
    const rig::Setup& truth_;
    double error_, level_dbfs_;
};

rig::Setup random_rig(unsigned seed) {
    std::mt19937 random(seed);
    const auto between = [&](double low, double high) {
        return std::uniform_real_distribution<double>(low, high)(random);
    };
    rig::Setup setup;
    setup.simulated.seed = seed;
    setup.routing.common_mode_output = 2;
    setup.routing.reference_input = 2;
    auto& interface = setup.simulated.interface;
    interface.output_full_scale_dbu = between(4.0, 24.0);
    interface.input_full_scale_dbu = between(0.0, 24.0);
    interface.reference_full_scale_dbu = interface.output_full_scale_dbu + between(0.5, 8.0);
    interface.input_noise_dbfs = between(-115.0, -90.0);
    interface.output_noise_dbfs = between(-115.0, -95.0);
    interface.latency_frames = between(100.0, 2500.0);
    interface.ac_corner_hz = between(0.5, 5.0);
    return setup;
}

CalibrateOptions quick() {
    CalibrateOptions options;
    options.accuracy = {0.5, 1.0, 2000.0, true};
    options.whole_response = false;
    options.time_utc = "2026-05-04T09:03:07Z";
    return options;
}

CalibrationResult calibrated(const rig::Setup& setup, Bench& bench,
                             const CalibrateOptions& options = quick()) {
    rig::Session session(setup, rig::open_backend(setup));
    return calibrate(session, bench, options);
}

// 500 random interfaces, a meter of 0.5 % that shows up to 5999: the absolute level within 0.05 dB (0.5 % is
// 0.043 dB, half a count of the last place 0.005 and less), and inside the stated uncertainty in 95 of 100.
void expect_true_levels(unsigned first, unsigned last) {
    int output_inside = 0, input_inside = 0, reference_inside = 0;
    double worst = 0.0;
    for (unsigned seed = first; seed < last; ++seed) {
        const rig::Setup setup = random_rig(seed);
        std::mt19937 random(seed + 9000);
        const double error = std::uniform_real_distribution<double>(-0.005, 0.005)(random);
        MeterBench bench(setup, error, -6.0);
        bench.range_volts = 6.0;
        auto options = quick();
        options.accuracy.counts = 6000.0;
        const auto result = calibrated(setup, bench, options);
        const auto& truth = setup.simulated.interface;
        const auto& got = result.calibration;
        const double output = std::abs(got.output_full_scale_dbu - truth.output_full_scale_dbu);
        const double input = std::abs(got.input_full_scale_dbu - truth.input_full_scale_dbu);
        worst = std::max({worst, output, input});
        output_inside += output <= got.output_uncertainty_db;
        input_inside += input <= got.input_uncertainty_db;
        reference_inside += std::abs(*got.reference_full_scale_dbu - *truth.reference_full_scale_dbu) <=
                            got.input_uncertainty_db;
        EXPECT_NEAR(*got.loop_latency_frames, truth.latency_frames, 0.2) << seed;
        EXPECT_NEAR(*got.loop_noise_dbfs,
                    10.0 * std::log10(std::pow(10.0, truth.input_noise_dbfs / 10.0) +
                                      std::pow(10.0, (truth.output_noise_dbfs + truth.output_full_scale_dbu -
                                                      truth.input_full_scale_dbu) /
                                                         10.0) +
                                      1e-11),
                    1.0)
            << seed;
        EXPECT_EQ(result.path.polarity, 1);
    }
    EXPECT_LE(worst, 0.05);
    const int enough = static_cast<int>(0.95 * (last - first));
    EXPECT_GE(output_inside, enough);
    EXPECT_GE(input_inside, enough);
    EXPECT_GE(reference_inside, enough);
}
TEST(CalibrateTest, FiveHundredRandomInterfacesA) {
    expect_true_levels(1, 251);
}
TEST(CalibrateTest, FiveHundredRandomInterfacesB) {
    expect_true_levels(251, 501);
}

TEST(CalibrateTest, AdviceIsGivenAndFollowed) {
    rig::Setup setup = random_rig(3);
    setup.simulated.interface.output_full_scale_dbu =
        16.0;  // 2.45 V at -6 dBFS: just too much for the 2 V range
    setup.simulated.interface.input_full_scale_dbu = 18.0;
    auto options = quick();
    options.accuracy = {0.5, 3.0, 2000.0, true};
    MeterBench bench(setup, 0.0, -6.0);
    const auto result = calibrated(setup, bench, options);
    ASSERT_EQ(bench.asked.size(), 2U);
    EXPECT_THAT(bench.asked[0], HasSubstr("never behind it"));
    EXPECT_THAT(bench.asked[1], HasSubstr("2 V range"));
    EXPECT_LT(result.calibration.output_uncertainty_db, 0.1);
    EXPECT_NEAR(result.calibration.output_full_scale_dbu, 16.0, 0.004);
}

TEST(CalibrateTest, AReadingThatContradictsTheLoopIsRefusedAndSaysWhatIsLikely) {
    rig::Setup setup = random_rig(5);
    setup.simulated.interface.input_full_scale_dbu = setup.simulated.interface.output_full_scale_dbu + 2.0;
    MeterBench before(setup, 0.0, -6.0);
    setup.calibration = calibrated(setup, before).calibration;
    const std::pair<double, const char*> wrongs[] = {
        {0.5, "one leg"}, {std::sqrt(2.0), "peak value"}, {2.0 * std::sqrt(2.0), "peak-to-peak"}};
    for (const auto& [scale, words] : wrongs) {
        MeterBench bench(setup, 0.0, -6.0);
        bench.scale = scale;
        try {
            calibrated(setup, bench);
            ADD_FAILURE() << scale;
        } catch (const UsageError& error) {
            EXPECT_THAT(error.what(), HasSubstr(words));
            EXPECT_THAT(error.what(), HasSubstr("stays valid"));
        }
        auto options = quick();
        options.accept_reading = true;
        MeterBench again(setup, 0.0, -6.0);
        again.scale = scale;
        EXPECT_NO_THROW(calibrated(setup, again, options));
    }
}

TEST(CalibrateTest, ADishonestPathIsNotCalibrated) {
    const auto said = [](const std::function<void(rig::Setup&)>& make) -> std::string {
        rig::Setup setup = random_rig(8);
        setup.simulated.interface.output_full_scale_dbu = 12.0;
        setup.simulated.interface.input_full_scale_dbu = 14.0;
        make(setup);
        MeterBench bench(setup, 0.0, -6.0);
        try {
            calibrated(setup, bench);
        } catch (const Error& error) {
            return error.what();
        }
        return "nothing";
    };
    EXPECT_EQ(said([](rig::Setup&) {}), "nothing");
    using Faults = rig::SimulatedFaults;
    const auto with = [&](const std::function<void(Faults&)>& make) {
        return said([&](rig::Setup& setup) { make(setup.simulated.faults); });
    };
    EXPECT_THAT(with([](Faults& f) { f.resample_to_hz = 44100.0; }), HasSubstr("44.1 kHz inside"));
    EXPECT_THAT(with([](Faults& f) { f.limiter_dbfs = -20.0; }), HasSubstr("depends on the level"));
    EXPECT_THAT(with([](Faults& f) { f.bass_boost_db = 6.0; }), HasSubstr("not flat"));
    EXPECT_THAT(with([](Faults& f) { f.monitor_mix = 0.02; }), HasSubstr("echo"));
    EXPECT_THAT(with([](Faults& f) { f.mono_outputs = true; }), HasSubstr("not separate"));
    EXPECT_THAT(with([](Faults& f) { f.outputs_swapped = true; }),
                HasSubstr("hears output 2 instead of output 1"));
    EXPECT_THAT(with([](Faults& f) { f.dead_output = 1; }), HasSubstr("hears nothing"));
    EXPECT_THAT(with([](Faults& f) { f.dead_output = 2; }), HasSubstr("hears nothing of output 2"));
    EXPECT_THAT(with([](Faults& f) { f.dead_input = 1; }), HasSubstr("hears nothing"));
    EXPECT_THAT(said([](rig::Setup& setup) {
                    setup.routing.reference_input.reset();
                    setup.routing.device_inputs = {1, 2};
                    setup.simulated.faults.mono_inputs = true;
                }),
                HasSubstr("not separate"));
}

TEST(CalibrateTest, SwappedLegsAreSaidAndAMissingTapToo) {
    rig::Setup setup = random_rig(11);
    setup.simulated.faults.legs_swapped = true;
    MeterBench bench(setup, 0.0, -6.0);
    const auto result = calibrated(setup, bench);
    ASSERT_FALSE(result.findings.cautions.empty());
    EXPECT_THAT(result.findings.cautions.front(), HasSubstr("legs are swapped"));
    rig::Setup untapped = random_rig(12);
    untapped.simulated.faults.dead_input = 2;
    MeterBench other(untapped, 0.0, -6.0);
    const auto without = calibrated(untapped, other);
    EXPECT_FALSE(without.calibration.reference_full_scale_dbu.has_value());
    EXPECT_THAT(without.findings.cautions.back(), HasSubstr("tap is not connected"));
}

TEST(CalibrateTest, AStopInTheMiddleThrowsAndKeepsNothing) {
    const rig::Setup setup = random_rig(2);
    std::atomic<bool> stop{true};
    rig::Session session(setup, rig::open_backend(setup), &stop);
    MeterBench bench(setup, 0.0, -6.0);
    EXPECT_THROW(calibrate(session, bench, quick()), CannotMeasure);
}

}  // namespace
}  // namespace coldpin::check
