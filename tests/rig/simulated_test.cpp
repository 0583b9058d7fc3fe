// The simulated bench against its own formulas, by means that share no code with the measurements.
#include <gmock/gmock.h>
#include <gtest/gtest.h>

#include "coldpin/units/error.h"
#include "coldpin/units/physics.h"

#include "backends.h"
#include "kit/signals.h"
#include "simulated_path.h"

namespace coldpin::rig {
namespace {

constexpr double rate = 48000.0;

Setup quiet_setup() {
    Setup setup;
    setup.audio.backend = BackendKind::simulated;
    setup.routing.common_mode_output = 2;
    setup.routing.reference_input = 2;
    setup.fixture.differential_loss_db = 40.0;
    setup.fixture.source_ohms = 150.0;
    auto& interface = setup.simulated.interface;
    interface.input_noise_dbfs = interface.output_noise_dbfs = -200.0;
    interface.leakage_db = interface.ground_loop_hum_dbfs = -300.0;
    interface.second_harmonic_db = interface.third_harmonic_db = -200.0;
    SimulatedPreamp preamp;
    preamp.second_harmonic_db = preamp.third_harmonic_db = -200.0;
    preamp.hum_input_dbu = -250.0;
    preamp.input_noise_nv = preamp.input_noise_pa = 0.0;
    setup.simulated.preamp = preamp;
    return setup;
}

TakeRequest tone_request(int output, double frequency_hz, double peak, Feed feed) {
    TakeRequest request;
    request.input_channels = 2;
    request.feed = feed;
    request.play.assign(2, std::vector<float>(96000, 0.0F));
    const auto tone = tests::sine(96000, rate, frequency_hz, peak);
    for (std::size_t n = 0; n < tone.size(); ++n)
        request.play[static_cast<std::size_t>(output) - 1][n] = static_cast<float>(tone[n]);
    return request;
}

// Plain correlation over whole seconds in the middle.
std::complex<double> phasor(const std::vector<float>& x, double frequency_hz) {
    std::complex<double> sum = 0.0;
    for (std::size_t n = 24000; n < 72000; ++n)
        sum += static_cast<double>(x[n]) *
               std::polar(1.0, -tests::two_pi * std::fmod(frequency_hz * static_cast<double>(n) / rate, 1.0));
    return 2.0 * sum / 48000.0;
}

TEST(SimulatedTest, GainCornersAndPolarityAreThoseOfTheFormula) {
    rig::Setup setup = quiet_setup();
    setup.simulated.preamp->polarity = -1;
    setup.simulated.preamp->lower_corner_hz = 30.0;
    setup.simulated.preamp->upper_corner_hz = 15000.0;
    for (double hz : {30.0, 997.0, 15000.0}) {
        const auto backend = make_simulated_backend(setup);
        const Take take = backend->play_and_record(tone_request(1, hz, 0.1, Feed::differential), nullptr);
        const std::complex<double> gain =
            phasor(take.recorded[0], hz) / phasor(take.recorded[1], hz);  // pad 40 dB, gain 40 dB
        const std::complex<double> truth = true_preamp_gain(*setup.simulated.preamp, 0.0, hz);
        EXPECT_NEAR(std::abs(gain / truth), 1.0, 2e-4) << hz;
        EXPECT_NEAR(std::arg(gain / truth), 0.0, 2e-3) << hz;
    }
}

TEST(SimulatedTest, RejectionFallsAsTheFormulaSays) {
    const rig::Setup setup = quiet_setup();
    for (double hz : {100.0, 3000.0, 10000.0}) {
        const auto backend = make_simulated_backend(setup);
        const double differential = std::abs(phasor(
            backend->play_and_record(tone_request(1, hz, 0.1, Feed::differential), nullptr).recorded[0], hz));
        const double common = std::abs(phasor(
            backend->play_and_record(tone_request(2, hz, 0.1, Feed::common_mode), nullptr).recorded[0], hz));
        // The same level at the converter is 40 dB less behind the pad.
        EXPECT_NEAR(units::db_from_ratio(differential / common) + 40.0,
                    true_rejection_db(*setup.simulated.preamp, hz), 0.02)
            << hz;
    }
}

TEST(SimulatedTest, NoiseIsThatOfAmplifierAndSource) {
    rig::Setup setup = quiet_setup();
    setup.simulated.preamp->input_noise_nv = 3.0;
    setup.simulated.preamp->input_noise_pa = 5.0;
    setup.simulated.preamp->flicker_corner_hz = 0.0;
    setup.simulated.preamp->lower_corner_hz = 0.01;
    setup.simulated.preamp->upper_corner_hz = 1e7;
    setup.simulated.preamp->gain_db_by_setting = {{"", 60.0}};
    const auto backend = make_simulated_backend(setup);
    TakeRequest request;
    request.play.assign(2, std::vector<float>(480000, 0.0F));
    const Take take = backend->play_and_record(request, nullptr);
    double sum = 0.0;
    for (float x : take.recorded[0]) sum += static_cast<double>(x) * x;
    const double volts =
        std::sqrt(sum / 480000.0) * units::volts_rms_from_dbu(18.0) * std::sqrt(2.0) / 1000.0;
    const double expected =
        std::sqrt(9e-18 + 25e-24 * 150.0 * 150.0 + 4.0 * units::boltzmann_j_per_k * 293.15 * 150.0) *
        std::sqrt(24000.0);
    EXPECT_NEAR(volts / expected, 1.0, 5.0 / std::sqrt(2.0 * 480000.0));
}

TEST(SimulatedTest, TheSameSeedGivesTheSameTakeAndAnotherDoesNot) {
    rig::Setup setup = quiet_setup();
    setup.simulated.interface.input_noise_dbfs = -100.0;
    const auto take = [&](unsigned long seed) {
        setup.simulated.seed = seed;
        return make_simulated_backend(setup)
            ->play_and_record(tone_request(1, 997.0, 0.1, Feed::differential), nullptr)
            .recorded;
    };
    EXPECT_EQ(take(3), take(3));
    EXPECT_NE(take(3), take(4));
}

TEST(SimulatedTest, ClipsAtTheUnitsLimitAndAtTheConverter) {
    rig::Setup setup = quiet_setup();
    setup.simulated.preamp->max_output_dbu = 10.0;
    setup.simulated.interface.latency_frames =
        391.0;  // a fraction would ring on the flat tops, as converters do
    const auto backend = make_simulated_backend(setup);
    const auto at_unit =
        backend->play_and_record(tone_request(1, 997.0, 0.99, Feed::differential), nullptr).recorded[0];
    const double limit = units::ratio_from_db(10.0 - 18.0);
    EXPECT_NEAR(*std::max_element(at_unit.begin(), at_unit.end()), limit, 0.01 * limit);
    setup.simulated.preamp->max_output_dbu = 40.0;
    setup.simulated.preamp->gain_db_by_setting = {{"", 50.0}};
    const auto at_converter = make_simulated_backend(setup)
                                  ->play_and_record(tone_request(1, 997.0, 0.9, Feed::differential), nullptr)
                                  .recorded[0];
    EXPECT_EQ(*std::max_element(at_converter.begin(), at_converter.end()), 1.0F);
}

TEST(SimulatedTest, AnUnknownSettingIsRefusedWithThoseThereAre) {
    rig::Setup setup = quiet_setup();
    setup.simulated.preamp->gain_db_by_setting = {{"30 dB", 30.0}, {"40 dB", 40.0}};
    const auto backend = make_simulated_backend(setup);
    EXPECT_TRUE(backend->rewire({Plug::both, "40 dB", ""}));
    try {
        backend->rewire({Plug::both, "44 dB", ""});
        FAIL();
    } catch (const UsageError& error) {
        EXPECT_THAT(error.what(),
                    testing::AllOf(testing::HasSubstr("44 dB"), testing::HasSubstr("'30 dB', '40 dB'")));
    }
}

}  // namespace
}  // namespace coldpin::rig
