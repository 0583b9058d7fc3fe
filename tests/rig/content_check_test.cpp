#include "coldpin/rig/content_check.h"

#include <gtest/gtest.h>

#include "kit/signals.h"

namespace coldpin::rig {
namespace {

constexpr double rate = 48000.0;

signal::Stimulus stimulus_of(signal::StimulusKind kind, double length_s = 2.0) {
    signal::Stimulus stimulus;
    stimulus.kind = std::move(kind);
    stimulus.length_s = length_s;
    stimulus.level_dbfs = -12.0;
    return stimulus;
}

std::vector<double> recorded(const signal::Stimulus& stimulus, const tests::Device& device, double noise_dbfs,
                             unsigned seed) {
    const auto sent = signal::render(stimulus);
    std::vector<double> padded(4800, 0.0);
    padded.insert(padded.end(), sent.begin(), sent.end());
    auto x = tests::through(padded, device, rate, padded.size() + 30000);
    tests::add(x, tests::white_noise(x.size(), units::sample_rms_from_dbfs(noise_dbfs), seed));
    tests::add(x, tests::hum(x.size(), rate, 50.01, 0.0, {1e-4, 0.0, 3e-5}));
    return x;
}

std::vector<double> losing(std::vector<double> x, std::size_t at, std::size_t frames) {
    x.erase(x.begin() + static_cast<std::ptrdiff_t>(at),
            x.begin() + static_cast<std::ptrdiff_t>(at + frames));
    return x;
}

std::vector<double> repeating(std::vector<double> x, std::size_t at, std::size_t frames) {
    const std::vector<double> block(x.begin() + static_cast<std::ptrdiff_t>(at - frames),
                                    x.begin() + static_cast<std::ptrdiff_t>(at));
    x.insert(x.begin() + static_cast<std::ptrdiff_t>(at), block.begin(), block.end());
    return x;
}

const signal::Stimulus tone = stimulus_of(signal::Tone{997.0});
const signal::Stimulus low_tone = stimulus_of(signal::Tone{85.0});
const signal::Stimulus many = stimulus_of(signal::Multitone{{85.0, 997.0, 9973.0}});
const signal::Stimulus sweep = stimulus_of(signal::Sweep{10.0, 22000.0}, 3.0);

tests::Device preamp() {
    tests::Device device;
    device.gain = 0.5;
    device.high_pass_hz = 8.0;
    device.low_pass_hz = 60000.0;
    device.delay_frames = 391.37;
    return device;
}

TEST(ContentCheckTest, HealthyTakesAreWhole) {
    unsigned seed = 0;
    for (const auto& stimulus : {tone, low_tone, many, sweep})
        for (double noise : {-100.0, -60.0, -40.0, -20.0})
            for (int round = 0; round < 8; ++round) {
                tests::Device device = preamp();
                if (round % 3 == 1) device.high_pass_hz = 60.0;
                if (round % 3 == 2) device.low_pass_hz = 9000.0;
                const auto report = check_content(recorded(stimulus, device, noise, ++seed), rate, stimulus);
                EXPECT_TRUE(report.whole())
                    << signal::kind_name(stimulus) << " " << noise << ": " << report.glitches[0].what;
                if (noise <= -60.0) {
                    EXPECT_TRUE(report.proven) << signal::kind_name(stimulus) << " " << noise;
                }
            }
}

TEST(ContentCheckTest, LostAndRepeatedFramesAreFoundWhereverTheyAre) {
    unsigned seed = 500;
    for (const auto& stimulus : {tone, many, sweep}) {
        const std::size_t frames = signal::frame_count(stimulus);
        for (double place : {0.3, 0.5, 0.7, 0.9})
            for (std::size_t count : {1U, 7U, 64U, 256U}) {
                const auto at = 4800 + 391 + static_cast<std::size_t>(place * static_cast<double>(frames));
                const auto x = recorded(stimulus, preamp(), -80.0, ++seed);
                EXPECT_FALSE(check_content(losing(x, at, count), rate, stimulus).whole())
                    << signal::kind_name(stimulus) << " " << place << " lost " << count;
                EXPECT_FALSE(check_content(repeating(x, at, count), rate, stimulus).whole())
                    << signal::kind_name(stimulus) << " " << place << " repeated " << count;
            }
    }
}

// Also where a frame turns the phase by a degree: through ordinary filters, with hum 60 dB below the sweep.
// One frame from 65 Hz up; below, where it turns the sweep by less than half a degree, seven.
TEST(ContentCheckTest, FewFramesAreFoundLowInASweepToo) {
    unsigned seed = 900;
    for (double corner_hz : {3.0, 60.0})
        for (double hz = 30.0; hz < 9000.0; hz *= 1.47) {
            tests::Device device = preamp();
            device.high_pass_hz = corner_hz;
            const auto x = recorded(sweep, device, -85.0, ++seed);
            const auto& kind = std::get<signal::Sweep>(sweep.kind);
            const double at_s =
                signal::sweep_time_constant_s(kind, sweep.length_s) * std::log(hz / kind.from_hz);
            const auto at = 4800 + 391 + static_cast<std::size_t>(at_s * rate);
            for (std::size_t count : {1U, 7U, 64U, 1024U}) {
                if (count == 1 && hz < 65.0) continue;
                EXPECT_FALSE(check_content(losing(x, at, count), rate, sweep).whole())
                    << count << " lost at " << hz << " Hz, corner " << corner_hz;
                EXPECT_FALSE(check_content(repeating(x, at, count), rate, sweep).whole())
                    << count << " repeated at " << hz << " Hz, corner " << corner_hz;
            }
        }
}

TEST(ContentCheckTest, TheGlitchIsNamedWhereItIs) {
    const auto x = losing(recorded(tone, preamp(), -80.0, 3), 50000, 7);
    const auto report = check_content(x, rate, tone);
    ASSERT_FALSE(report.whole());
    EXPECT_NEAR(static_cast<double>(report.glitches[0].frame), 50000.0, 1500.0);
}

TEST(ContentCheckTest, TwoClocksAreNoGlitch) {
    // 100 ppm: the recording is made with a tone that much off.
    const auto fast = stimulus_of(signal::Tone{997.0 * 1.0001});
    EXPECT_TRUE(check_content(recorded(fast, preamp(), -80.0, 1), rate, tone).whole());
}

TEST(ContentCheckTest, ExactZerosOnALiveInputAreFound) {
    auto x = recorded(tone, preamp(), -80.0, 1);
    std::fill(x.begin() + 40000, x.begin() + 40007, 0.0);
    EXPECT_FALSE(check_content(x, rate, tone).whole());
    EXPECT_FALSE(
        check_content(std::vector<double>(48000, 0.0), rate, stimulus_of(signal::Silence{})).whole());
    // A coarse converter's quiet input rests on zero now and then: that is no fault.
    auto coarse = tests::white_noise(96000, 0.4 / 32768.0, 5);
    for (double& v : coarse) v = std::round(v * 32768.0) / 32768.0;
    EXPECT_TRUE(check_content(coarse, rate, stimulus_of(signal::Silence{})).whole());
}

TEST(ContentCheckTest, ARepeatedBlockOfNoiseIsFound) {
    const auto silence = stimulus_of(signal::Silence{});
    const auto noise = tests::white_noise(96000, 1e-4, 5);
    EXPECT_TRUE(check_content(noise, rate, silence).whole());
    EXPECT_FALSE(check_content(repeating(noise, 50000, 64), rate, silence).whole());
    EXPECT_FALSE(check_content(repeating(noise, 50000, 1024), rate, silence).whole());
}

TEST(ContentCheckTest, WhatCannotBeHeardIsNotProven) {
    const auto report = check_content(tests::white_noise(130000, 0.1, 4), rate, tone);
    EXPECT_TRUE(report.whole());
    EXPECT_FALSE(report.proven);
}

}  // namespace
}  // namespace coldpin::rig
