#include "coldpin/measure/response.h"

#include <gmock/gmock.h>
#include <gtest/gtest.h>

#include "coldpin/units/error.h"

#include "kit/signals.h"

namespace coldpin::measure {
namespace {

constexpr double rate = 48000.0;

signal::Stimulus sweep(double from_hz, double to_hz, double length_s) {
    signal::Stimulus stimulus;
    stimulus.kind = signal::Sweep{from_hz, to_hz};
    stimulus.length_s = length_s;
    stimulus.level_dbfs = -12.0;
    return stimulus;
}

// The recording begins before the stimulus, ends after it, hums and hisses.
std::vector<double> recorded(const signal::Stimulus& stimulus, const tests::Device& device, unsigned seed = 3,
                             double noise_dbfs = -80.0, double hum_peak = 1e-3) {
    const auto sent = signal::render(stimulus);
    const std::size_t frames = sent.size() + static_cast<std::size_t>(1.2 * stimulus.rate_hz);
    auto x = tests::through(sent, device, stimulus.rate_hz, frames);
    tests::add(x, tests::white_noise(frames, units::sample_rms_from_dbfs(noise_dbfs), seed));
    tests::add(x, tests::hum(frames, stimulus.rate_hz, 50.02, 0.02,
                             {hum_peak, 0.0, 0.3 * hum_peak, 0.0, 0.1 * hum_peak}));
    return x;
}

ResponseQuestion ask(const std::vector<double>& x, const signal::Stimulus& stimulus) {
    ResponseQuestion question;
    question.recording = x;
    question.rate_hz = stimulus.rate_hz;
    question.stimulus = stimulus;
    return question;
}

double truth_db(const tests::Device& device, double hz) {
    return units::db_from_ratio(std::abs(device.response(hz)) / std::abs(device.response(997.0)));
}

struct Case {
    double from_hz, to_hz, length_s, high_pass_hz, low_pass_hz;
};
void PrintTo(const Case& c, std::ostream* out) {
    *out << c.from_hz << "-" << c.to_hz << "Hz_" << c.length_s << "s_" << c.high_pass_hz << "_"
         << c.low_pass_hz;
}
class ResponseTest : public testing::TestWithParam<Case> {};

TEST_P(ResponseTest, IsWithinTwoHundredthsFromTwentyHertzToTwentyKilohertz) {
    const auto& param = GetParam();
    tests::Device device;
    device.high_pass_hz = param.high_pass_hz;
    device.low_pass_hz = param.low_pass_hz;
    device.delay_frames = 5000.37;
    const auto stimulus = sweep(param.from_hz, param.to_hz, param.length_s);
    const auto findings = response(ask(recorded(stimulus, device), stimulus));
    const Curve& magnitude = *findings.curve("magnitude");
    std::size_t looked_at = 0, covered = 0;
    for (std::size_t k = 0; k < magnitude.x.size(); ++k) {
        if (magnitude.x[k] < 20.0 - 1e-9 || magnitude.x[k] > 20000.0 + 1e-6) continue;
        const double error = magnitude.y[k] - truth_db(device, magnitude.x[k]);
        EXPECT_NEAR(error, 0.0, 0.02) << magnitude.x[k];
        ++looked_at;
        covered += std::abs(error) <= magnitude.uncertainty[k] + 1e-12;
    }
    EXPECT_GE(looked_at, 240U);
    EXPECT_GE(static_cast<double>(covered), 0.93 * static_cast<double>(looked_at));
}

INSTANTIATE_TEST_SUITE_P(Sweeps, ResponseTest,
                         testing::Values(Case{20, 20000, 2, 6, 65000}, Case{20, 20000, 5, 6, 65000},
                                         Case{20, 20000, 10, 30, 18000}, Case{10, 22000, 2, 5, 80000},
                                         Case{10, 22000, 5, 40, 12000}));

TEST(ResponseCornerTest, CornersAreWithinHalfAPercent) {
    for (double low : {12.0, 25.0, 60.0})
        for (double high : {6000.0, 12000.0, 18000.0})
            for (int order : {1, 2}) {
                tests::Device device;
                device.high_pass_hz = low;
                device.low_pass_hz = high;
                device.order = order;
                device.delay_frames = 391.4;
                const auto stimulus = sweep(6.0, 22500.0, 3.0);
                const auto findings = response(ask(recorded(stimulus, device), stimulus));
                // The true half-power points re 997 Hz, by bisection of the formula.
                const auto corner = [&](double inside, double outside) {
                    for (int i = 0; i < 60; ++i) {
                        const double middle = std::sqrt(inside * outside);
                        (truth_db(device, middle) > -3.0102999566 ? inside : outside) = middle;
                    }
                    return inside;
                };
                EXPECT_NEAR(findings.figure("lower_corner")->value / corner(997.0, 1.0), 1.0, 0.005);
                EXPECT_NEAR(findings.figure("upper_corner")->value / corner(997.0, 1e6), 1.0, 0.005);
                EXPECT_EQ(findings.figure("lower_corner")->bound, Bound::exact);
            }
}

TEST(ResponseCornerTest, BeyondTheSweepACornerIsABound) {
    tests::Device device;
    device.high_pass_hz = 3.0;
    device.low_pass_hz = 60000.0;
    const auto stimulus = sweep(20.0, 20000.0, 2.0);
    const auto findings = response(ask(recorded(stimulus, device), stimulus));
    EXPECT_EQ(findings.figure("lower_corner")->bound, Bound::at_most);
    EXPECT_DOUBLE_EQ(findings.figure("lower_corner")->value, 20.0);
    EXPECT_EQ(findings.figure("upper_corner")->bound, Bound::at_least);
    EXPECT_DOUBLE_EQ(findings.figure("upper_corner")->value, 20000.0);
}

TEST(ResponseTestOfPhase, PhaseAndGroupDelayAreThoseOfTheDeviceWithoutThePureDelay) {
    tests::Device device;
    device.high_pass_hz = 20.0;
    device.low_pass_hz = 15000.0;
    device.delay_frames = 1234.56;
    const auto stimulus = sweep(10.0, 22000.0, 3.0);
    const auto findings = response(ask(recorded(stimulus, device, 3, -100.0, 1e-6), stimulus));
    const Curve &phase = *findings.curve("phase"), &delay = *findings.curve("group_delay");
    for (std::size_t k = 0; k < phase.x.size(); ++k) {
        if (phase.x[k] < 20.0 || phase.x[k] > 20000.0) continue;
        EXPECT_NEAR(phase.y[k], std::arg(device.response(phase.x[k])) * 180.0 / std::numbers::pi, 0.1)
            << phase.x[k];
        const double h = phase.x[k] * 1e-4;
        const double slope =
            std::arg(device.response(phase.x[k] + h) / device.response(phase.x[k] - h)) / (2.0 * h);
        EXPECT_NEAR(delay.y[k], -slope / tests::two_pi, 2e-6 + 0.01 * std::abs(slope)) << phase.x[k];
    }
}

TEST(ResponseTestOfHarmonics, APolynomialsHarmonicsAreThoseOfTheFormula) {
    tests::Device device;
    device.second = 0.01;
    device.third = 0.02;
    device.delay_frames = 300.0;
    const auto stimulus = sweep(10.0, 22000.0, 5.0);
    const auto findings = response(ask(recorded(stimulus, device, 3, -90.0, 1e-5), stimulus));
    // x + a x^2 + b x^3 with x = A sin: fundamental A (1 + 3 b A^2/4), second a A^2/2, third b A^3/4.
    const double a = units::sine_peak_from_dbfs(-12.0), fundamental = a * (1.0 + 0.75 * 0.02 * a * a);
    const double second = units::db_from_ratio(0.01 * a * a / 2.0 / fundamental),
                 third = units::db_from_ratio(0.02 * a * a * a / 4.0 / fundamental);
    for (const auto& [name, truth, within] :
         {std::tuple{"harmonic_2", second, 0.2}, std::tuple{"harmonic_3", third, 0.5}}) {
        const Curve* curve = findings.curve(name);
        ASSERT_NE(curve, nullptr);
        EXPECT_GT(curve->x.size(), 100U);
        for (std::size_t k = 0; k < curve->x.size(); ++k)
            if (curve->x[k] > 30.0 && curve->x[k] < 6000.0) {
                EXPECT_NEAR(curve->y[k], truth, std::max(within, curve->uncertainty[k] * 1.5))
                    << name << curve->x[k];
            }
    }
}

TEST(ResponseTestOfMultitone, EachToneIsRight) {
    signal::Stimulus stimulus;
    stimulus.kind = signal::Multitone{{31.0, 127.0, 499.0, 997.0, 4001.0, 12503.0, 19997.0}};
    stimulus.length_s = 3.0;
    stimulus.level_dbfs = -18.0;
    tests::Device device;
    device.high_pass_hz = 20.0;
    device.low_pass_hz = 30000.0;
    device.delay_frames = 2000.4;
    const auto findings = response(ask(recorded(stimulus, device), stimulus));
    const Curve& magnitude = *findings.curve("magnitude");
    ASSERT_EQ(magnitude.x.size(), 7U);
    for (std::size_t k = 0; k < 7; ++k)
        EXPECT_NEAR(magnitude.y[k], truth_db(device, magnitude.x[k]), 0.02) << magnitude.x[k];
}

TEST(ResponseTestOfReference, TheReferenceChannelTakesTheInterfaceOut) {
    const auto stimulus = sweep(10.0, 22000.0, 2.0);
    tests::Device interface, both;
    interface.high_pass_hz = 12.0;
    interface.low_pass_hz = 20000.0;
    interface.delay_frames = 800.0;
    const auto sent = signal::render(stimulus);
    const std::size_t frames = sent.size() + 48000;
    auto reference = tests::through(sent, interface, rate, frames);
    tests::Device preamp;
    preamp.high_pass_hz = 30.0;
    auto x = tests::through(reference, preamp, rate, frames);
    tests::add(reference, tests::white_noise(frames, 1e-5, 1));
    tests::add(x, tests::white_noise(frames, 1e-5, 2));
    auto question = ask(x, stimulus);
    question.reference = reference;
    const auto findings = response(question);
    EXPECT_EQ(findings.figure("upper_corner")->bound, Bound::at_least);
    EXPECT_NEAR(findings.figure("lower_corner")->value, 30.0, 0.15);
}

TEST(ResponseTestOfRefusals, WhatIsNotTheStimulusIsRefused) {
    const auto stimulus = sweep(20.0, 20000.0, 2.0);
    EXPECT_THROW(response(ask(std::vector<double>(150000, 0.0), stimulus)), CannotMeasure);
    EXPECT_THROW(response(ask(tests::white_noise(150000, 0.1, 1), stimulus)), CannotMeasure);
    // A sweep of another length.
    EXPECT_THROW(response(ask(recorded(sweep(20.0, 20000.0, 3.0), {}), stimulus)), CannotMeasure);
    // Cut off at its end.
    auto x = recorded(stimulus, {});
    x.resize(90000);
    EXPECT_THROW(response(ask(x, stimulus)), CannotMeasure);
    auto tone = stimulus;
    tone.kind = signal::Tone{997.0};
    EXPECT_THROW(response(ask(recorded(tone, {}), tone)), CannotMeasure);
    auto nothing = ask(recorded(stimulus, {}), stimulus);
    const auto y = recorded(stimulus, {});
    nothing.recording = y;
    nothing.stimulus.reset();
    EXPECT_THROW(response(nothing), UsageError);
    nothing.stimulus = stimulus;
    nothing.stimulus->rate_hz = 44100.0;
    EXPECT_THROW(response(nothing), UsageError);
}

}  // namespace
}  // namespace coldpin::measure
