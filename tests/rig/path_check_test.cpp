// Faults of the path, each provoked in the pretended interface, in random ones; and clean ones that must
// pass.
#include "coldpin/rig/path_check.h"

#include <functional>
#include <random>
#include <string>

#include <gmock/gmock.h>
#include <gtest/gtest.h>

#include "coldpin/rig/backend.h"
#include "coldpin/units/error.h"

namespace coldpin::rig {
namespace {

// An interface as they come: levels, noise, corners, distortion, latency, hum.
rig::Setup random_interface(unsigned seed, double rate_hz = 48000.0) {
    std::mt19937 random(seed);
    const auto between = [&](double low, double high) {
        return std::uniform_real_distribution<double>(low, high)(random);
    };
    rig::Setup setup;
    setup.audio.sample_rate_hz = rate_hz;
    setup.simulated.seed = seed;
    auto& interface = setup.simulated.interface;
    interface.output_full_scale_dbu = between(6.0, 22.0);
    interface.input_full_scale_dbu = interface.output_full_scale_dbu + between(0.5, 8.0);
    interface.input_noise_dbfs = between(-116.0, -92.0);
    interface.output_noise_dbfs = between(-118.0, -96.0);
    interface.ac_corner_hz = between(0.4, 8.0);
    interface.second_harmonic_db = between(-115.0, -85.0);
    interface.third_harmonic_db = between(-115.0, -85.0);
    interface.latency_frames = between(40.0, 2800.0);
    interface.ground_loop_hum_dbfs = between(-125.0, -85.0);
    interface.mains_hz = between(0.0, 1.0) < 0.5 ? 50.02 : 59.97;
    return setup;
}

// The probe through the loop; levels as a rig would play them.
PathReport looked_at(const rig::Setup& setup, double level_dbfs,
                     const std::function<void(std::vector<float>&)>& spoil = {}) {
    const double rate = setup.audio.sample_rate_hz;
    const auto probe = render_path_probe(rate, level_dbfs);
    TakeRequest request;
    request.rate_hz = rate;
    request.play.assign(1, std::vector<float>(static_cast<std::size_t>(0.05 * rate), 0.0F));
    request.play[0].insert(request.play[0].end(), probe.begin(), probe.end());
    request.play[0].resize(request.play[0].size() + static_cast<std::size_t>(0.15 * rate), 0.0F);
    auto backend = open_backend(setup);
    backend->rewire({Plug::loop_differential, "", ""});
    auto recorded = backend->play_and_record(request, nullptr).recorded.front();
    if (spoil) spoil(recorded);
    const std::vector<double> x(recorded.begin(), recorded.end());
    PathExpectation expectation;
    const auto& interface = setup.simulated.interface;
    expectation.gain_db = interface.output_full_scale_dbu - interface.input_full_scale_dbu;
    return check_path(x, rate, level_dbfs, expectation);
}

double random_level(unsigned seed) {
    return -3.0 - 9.0 * (seed % 97) / 97.0;
}

std::string all_of(const PathReport& report) {
    std::string text;
    for (const auto& finding : report.findings) text += finding.sentence + "\n";
    return text;
}

// 200 of 200 for each fault.
void expect_found(PathFault fault, const std::function<void(rig::Setup&, std::mt19937&)>& make,
                  double rate_hz = 48000.0, unsigned rounds = 200) {
    unsigned found = 0;
    std::string missed;
    for (unsigned seed = 1; seed <= rounds; ++seed) {
        rig::Setup setup = random_interface(seed, rate_hz);
        std::mt19937 random(seed + 5000);
        make(setup, random);
        const auto report = looked_at(setup, random_level(seed));
        if (report.finding(fault) != nullptr)
            ++found;
        else
            missed += "seed " + std::to_string(seed) + ": " + all_of(report) + "\n";
    }
    EXPECT_EQ(found, rounds) << missed.substr(0, 2000);
}

double between(std::mt19937& random, double low, double high) {
    return std::uniform_real_distribution<double>(low, high)(random);
}

// At most one false alarm in a thousand.
void expect_clean(unsigned first, unsigned last) {
    unsigned alarms = 0;
    std::string said;
    for (unsigned seed = first; seed < last; ++seed) {
        const rig::Setup setup =
            random_interface(seed, seed % 4 == 0 ? 44100.0 : (seed % 4 == 1 ? 96000.0 : 48000.0));
        const auto report = looked_at(setup, random_level(seed));
        if (!report.findings.empty()) {
            ++alarms;
            said += "seed " + std::to_string(seed) + ": " + all_of(report);
        }
        ASSERT_TRUE(report.gain_db.has_value());
        EXPECT_NEAR(
            *report.gain_db,
            setup.simulated.interface.output_full_scale_dbu - setup.simulated.interface.input_full_scale_dbu,
            0.03);
        EXPECT_EQ(report.polarity, 1);
        EXPECT_NEAR(*report.clock_ppm, 0.0, 0.9);
    }
    EXPECT_LE(alarms, 1U) << said.substr(0, 2000);
}

TEST(PathCheckTest, CleanInterfacesPassA) {
    expect_clean(10000, 10500);
}
TEST(PathCheckTest, CleanInterfacesPassB) {
    expect_clean(10500, 11000);
}

TEST(PathCheckTest, AMovedKnobIsNoticed) {
    expect_found(PathFault::level_moved, [](rig::Setup& setup, std::mt19937& random) {
        setup.simulated.faults.output_moved_db = between(random, 0.0, 1.0) < 0.5 ? 0.2 : -0.2;
    });
}

TEST(PathCheckTest, AResamplerIsFound) {
    expect_found(PathFault::resampled, [](rig::Setup& setup, std::mt19937& random) {
        setup.simulated.faults.resample_to_hz = 44100.0;
        setup.simulated.faults.resampler_half_width = std::uniform_int_distribution<int>(8, 64)(random);
    });
}

// 48 kHz inside at 44.1 kHz: few zero crossings leave images or droop; a better resampler leaves nothing to
// find.
TEST(PathCheckTest, AResamplerToAHigherRateIsFound) {
    unsigned found = 0;
    for (unsigned seed = 1; seed <= 200; ++seed) {
        rig::Setup setup = random_interface(seed, 44100.0);
        setup.simulated.faults.resample_to_hz = 48000.0;
        std::mt19937 random(seed);
        setup.simulated.faults.resampler_half_width = std::uniform_int_distribution<int>(4, 20)(random);
        const auto report = looked_at(setup, random_level(seed));
        if (report.finding(PathFault::resampled) != nullptr || report.finding(PathFault::filtered) != nullptr)
            ++found;
    }
    EXPECT_EQ(found, 200U);
}

TEST(PathCheckTest, ALimiterIsFound) {
    expect_found(PathFault::level_dependent, [](rig::Setup& setup, std::mt19937& random) {
        auto& faults = setup.simulated.faults;
        faults.limiter_dbfs = -20.0;
        // So that the probe reaches it: with 8 dB between output and input it need not.
        setup.simulated.interface.input_full_scale_dbu =
            setup.simulated.interface.output_full_scale_dbu + 1.0;
        faults.limiter_ratio = 3.0;
        faults.limiter_attack_s = between(random, 0.001, 0.03);
        faults.limiter_release_s = between(random, 0.02, 0.5);
    });
}

TEST(PathCheckTest, HalfAPerCentOfMonitorMixIsFound) {
    expect_found(PathFault::echo, [](rig::Setup& setup, std::mt19937& random) {
        setup.simulated.faults.monitor_mix = 0.005;
        setup.simulated.faults.monitor_delay_frames = std::floor(between(random, 0.0, 900.0));
        // A share of what is heard, so of the input's own level.
        setup.simulated.interface.input_full_scale_dbu =
            setup.simulated.interface.output_full_scale_dbu + 0.5;
        setup.simulated.interface.latency_frames = between(random, 40.0, 900.0);
    });
}

TEST(PathCheckTest, ADropoutOf32FramesIsFound) {
    unsigned found = 0;
    std::string missed;
    for (unsigned seed = 1; seed <= 200; ++seed) {
        const rig::Setup setup = random_interface(seed);
        std::mt19937 random(seed + 7000);
        const auto latency = static_cast<std::size_t>(setup.simulated.interface.latency_frames);
        // Anywhere between the first tone and the end of the sweep, lost or zeroed.
        const auto at =
            latency + static_cast<std::size_t>(between(random, 0.05 + 0.03, 0.05 + 0.68) * 48000.0);
        const bool zeroed = seed % 2 == 0;
        const auto report = looked_at(setup, random_level(seed), [&](std::vector<float>& x) {
            const auto place = x.begin() + static_cast<std::ptrdiff_t>(at);
            if (zeroed)
                std::fill(place, place + 32, 0.0F);
            else
                x.erase(place, place + 32);
        });
        if (report.finding(PathFault::frames_lost) != nullptr)
            ++found;
        else
            missed += "seed " + std::to_string(seed) + " at " + std::to_string(at - latency) +
                      (zeroed ? " zeroed\n" : " lost\n");
    }
    EXPECT_EQ(found, 200U) << missed.substr(0, 2000);
}

TEST(PathCheckTest, TwentyPpmBetweenClocksAreFoundAndMeasured) {
    for (unsigned seed = 1; seed <= 200; ++seed) {
        rig::Setup setup = random_interface(seed);
        const double ppm = seed % 2 == 0 ? 20.0 : -20.0;
        setup.simulated.faults.clock_ppm = ppm;
        const auto report = looked_at(setup, random_level(seed));
        ASSERT_NE(report.finding(PathFault::two_clocks), nullptr) << seed << all_of(report);
        EXPECT_EQ(report.findings.size(), 1U) << all_of(report);
        EXPECT_NEAR(*report.clock_ppm, ppm, 0.5) << seed;
    }
}

TEST(PathCheckTest, ClocksThatWanderAreRefused) {
    expect_found(
        PathFault::unsteady_clocks,
        [](rig::Setup& setup, std::mt19937& random) {
            setup.simulated.faults.clock_ppm = between(random, 20.0, 100.0);
            setup.simulated.faults.clock_drift_ppm_per_s = between(random, 150.0, 400.0);
        },
        48000.0, 30);
}

TEST(PathCheckTest, OtherFaultsAreNamed) {
    const auto with = [](const std::function<void(SimulatedFaults&)>& make, unsigned seed) {
        rig::Setup setup = random_interface(seed);
        make(setup.simulated.faults);
        return looked_at(setup, -6.0);
    };
    for (unsigned seed = 1; seed <= 40; ++seed) {
        const auto boosted = with([](auto& f) { f.bass_boost_db = 3.0; }, seed);
        EXPECT_NE(boosted.finding(PathFault::filtered), nullptr) << all_of(boosted);
        EXPECT_NE(with([](auto& f) { f.legs_swapped = true; }, seed).finding(PathFault::inverted), nullptr);
        EXPECT_NE(with([](auto& f) { f.dead_output = 1; }, seed).finding(PathFault::not_heard), nullptr);
        EXPECT_NE(with([](auto& f) { f.dead_input = 1; }, seed).finding(PathFault::not_heard), nullptr);
        rig::Setup hot = random_interface(seed);
        hot.simulated.interface.input_full_scale_dbu = hot.simulated.interface.output_full_scale_dbu - 9.0;
        EXPECT_NE(looked_at(hot, -6.0).finding(PathFault::clipped), nullptr);
    }
}

TEST(PathCheckTest, UnfitArgumentsAreRefused) {
    EXPECT_THROW(render_path_probe(8000.0, -6.0), UsageError);
    EXPECT_THROW(render_path_probe(48000.0, 1.0), UsageError);
    EXPECT_LT(static_cast<double>(render_path_probe(48000.0, -6.0).size()) / 48000.0, 0.8);
}

}  // namespace
}  // namespace coldpin::rig
