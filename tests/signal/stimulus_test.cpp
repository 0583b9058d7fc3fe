#include "coldpin/signal/stimulus.h"

#include <cmath>
#include <limits>

#include <gmock/gmock.h>
#include <gtest/gtest.h>

#include "coldpin/spectrum/sine_fit.h"
#include "coldpin/units/error.h"
#include "coldpin/units/level.h"

#include "kit/signals.h"

namespace coldpin::signal {
namespace {

using testing::HasSubstr;
using tests::two_pi;

Stimulus make(StimulusKind kind, double length_s = 1.0, double level_dbfs = -12.0, double rate_hz = 48000.0) {
    Stimulus stimulus;
    stimulus.kind = std::move(kind);
    stimulus.length_s = length_s;
    stimulus.level_dbfs = level_dbfs;
    stimulus.rate_hz = rate_hz;
    return stimulus;
}

std::string refusal(const Stimulus& stimulus) {
    try {
        render(stimulus);
    } catch (const UsageError& error) {
        return error.what();
    }
    return "";
}

TEST(StimulusTest, HasExactlyLengthTimesRateFrames) {
    for (double rate : {44100.0, 48000.0, 96000.0, 192000.0})
        for (double length : {0.1, 0.333, 1.0, 2.00001}) {
            const auto stimulus = make(Tone{997.0}, length, -12.0, rate);
            EXPECT_EQ(render(stimulus).size(), static_cast<std::size_t>(std::llround(length * rate)));
            EXPECT_EQ(frame_count(stimulus), render(stimulus).size());
        }
}

TEST(StimulusTest, AToneIsTheSineOfTheFormulaToTheLastDigits) {
    const auto samples = render(make(Tone{997.0}, 3.0));
    const double peak = units::sine_peak_from_dbfs(-12.0);
    for (std::size_t n = 1000; n + 1000 < samples.size(); n += 7)
        EXPECT_NEAR(samples[n],
                    peak * std::sin(two_pi * std::fmod(997.0 * static_cast<double>(n) / 48000.0, 1.0)),
                    1e-12);
}

TEST(StimulusTest, FadesAreRaisedCosines) {
    auto stimulus = make(Tone{1000.0}, 0.5, 0.0);
    const auto faded = render(stimulus);
    stimulus.fade_s = 0.0;
    const auto plain = render(stimulus);
    const double frames = 480.0;
    for (std::size_t n = 1; n < 480; n += 13) {
        const double gain = 0.5 - 0.5 * std::cos(std::numbers::pi * (static_cast<double>(n) + 0.5) / frames);
        EXPECT_NEAR(faded[n], gain * plain[n], 1e-12);
        EXPECT_NEAR(faded[faded.size() - 1 - n], gain * plain[plain.size() - 1 - n], 1e-12);
    }
}

TEST(StimulusTest, AMultitonesRmsIsItsLevel) {
    auto stimulus =
        make(Multitone{{100.0, 1000.0, 2500.0, 10000.0}}, 1.0, -20.0);  // whole periods in a second
    stimulus.fade_s = 0.0;
    EXPECT_NEAR(units::dbfs_from_sample_rms(tests::rms(render(stimulus))), -20.0, 1e-9);
}

TEST(StimulusTest, AMultitonesCrestFactorIsLow) {
    std::vector<double> tones;
    for (int k = 1; k <= 60; ++k) tones.push_back(100.0 * k);
    auto stimulus = make(Multitone{tones}, 1.0, -20.0);
    stimulus.fade_s = 0.0;
    const auto samples = render(stimulus);
    double peak = 0.0;
    for (double x : samples) peak = std::max(peak, std::abs(x));
    // All in phase it would be sqrt(2 * 60) = 20.8 dB; Schroeder's phases stay below 6 dB.
    EXPECT_LT(units::db_from_ratio(peak / tests::rms(samples)), 6.0);
}

TEST(StimulusTest, AMultitoneTooLoudNamesTheHighestLevelThatFits) {
    const Multitone many{{100.0, 200.0, 300.0, 400.0}};
    const std::string message = refusal(make(many, 1.0, 0.0));
    ASSERT_THAT(message, HasSubstr("highest level that fits is "));
    const double level = std::stod(message.substr(message.find("fits is ") + 8));
    EXPECT_EQ(refusal(make(many, 1.0, level)), "");
    EXPECT_NE(refusal(make(many, 1.0, level + 0.03)), "");
}

TEST(StimulusTest, ASweepsHarmonicIsTheSweepItselfEarlier) {
    // x(t) = sin(phi(t)): twice the phase now is the phase L ln 2 later (Novak et al. 2015).
    const Sweep sweep{20.0, 20000.0};
    const double constant_s = sweep_time_constant_s(sweep, 5.0);
    EXPECT_NEAR(constant_s, 5.0 / std::log(1000.0), 1e-12);
    const auto phase = [&](double t) {
        return two_pi * sweep.from_hz * constant_s * std::exp(t / constant_s);
    };
    for (double t : {0.1, 1.0, 3.0})
        EXPECT_NEAR(2.0 * phase(t), phase(t + constant_s * std::log(2.0)), 1e-6 * phase(t));
    const auto samples = render(make(sweep, 5.0));
    for (std::size_t n = 5000; n < 230000; n += 9973)
        EXPECT_NEAR(samples[n],
                    units::sine_peak_from_dbfs(-12.0) *
                        std::sin(std::fmod(phase(static_cast<double>(n) / 48000.0), two_pi)),
                    1e-9);
}

TEST(StimulusTest, ASweepRunsFromItsFirstToItsLastFrequency) {
    auto stimulus = make(Sweep{100.0, 10000.0}, 2.0, 0.0);
    stimulus.fade_s = 0.0;
    const auto samples = render(stimulus);
    const auto crossings = [&](std::size_t begin, std::size_t end) {
        int count = 0;
        for (std::size_t n = begin + 1; n < end; ++n) count += (samples[n - 1] < 0.0) != (samples[n] < 0.0);
        return count;
    };
    // In the last 10 ms the frequency rises from 9772 to 10000 Hz: 98.9 periods, two crossings each, one
    // either way.
    EXPECT_NEAR(crossings(samples.size() - 480, samples.size()), 2.0 * 98.9, 2.0);
    EXPECT_NEAR(crossings(0, 4800), 2.0 * 11.2, 2.0);  // first 100 ms: 100 to 126 Hz
}

TEST(StimulusTest, ABurstHasWholeCyclesFromAZeroCrossingThenSilence) {
    const auto samples = render(make(Burst{5000.0, 5}, 0.1, 0.0));
    EXPECT_NEAR(samples[0], 0.0, 1e-12);
    EXPECT_NE(samples[47], 0.0);
    for (std::size_t n = 48; n < samples.size(); ++n) EXPECT_EQ(samples[n], 0.0);
}

TEST(StimulusTest, SilenceIsSilent) {
    for (double x : render(make(Silence{}))) EXPECT_EQ(x, 0.0);
}

TEST(StimulusTest, WhatCannotBePlayedIsRefusedInWords) {
    EXPECT_THAT(refusal(make(Tone{24000.0})), HasSubstr("24000"));
    EXPECT_THAT(refusal(make(Tone{-1.0})), HasSubstr("-1"));
    EXPECT_THAT(refusal(make(Sweep{2000.0, 20.0})), HasSubstr("rises"));
    EXPECT_THAT(refusal(make(Multitone{{}})), HasSubstr("at least one"));
    EXPECT_THAT(refusal(make(Burst{100.0, 200})), HasSubstr("longer"));
    EXPECT_THAT(refusal(make(Tone{997.0}, 0.015)), HasSubstr("two fades"));
    EXPECT_THAT(refusal(make(Tone{997.0}, 1.0, 0.1)), HasSubstr("full scale"));
    EXPECT_NE(refusal(make(Tone{std::numeric_limits<double>::quiet_NaN()})), "");
    EXPECT_NE(refusal(make(Tone{997.0}, std::numeric_limits<double>::infinity())), "");
}

}  // namespace
}  // namespace coldpin::signal
