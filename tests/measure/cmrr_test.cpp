#include "coldpin/measure/cmrr.h"

#include <gtest/gtest.h>

#include "coldpin/units/error.h"

#include "kit/signals.h"

namespace coldpin::measure {
namespace {

constexpr double rate = 48000.0;

// Differential at -40 dBu gives a tone of amplitude `a`; common mode at 0 dBu through `rejection_db` gives
// a * 10^((40 - rejection)/20).
struct Pair {
    std::vector<double> differential, common;
};
Pair tones(double rejection_db, double noise_rms, unsigned seed, double length_s = 10.0, double phase = 0.4) {
    const auto frames = static_cast<std::size_t>(length_s * rate);
    Pair pair;
    pair.differential.assign(frames + 20000, 0.0);
    pair.common.assign(frames + 30000, 0.0);
    const auto d = tests::sine(frames, rate, 997.0, 0.1);
    const auto c = tests::sine(frames, rate, 997.0, 0.1 * units::ratio_from_db(40.0 - rejection_db), phase);
    std::copy(d.begin(), d.end(), pair.differential.begin() + 10000);
    std::copy(c.begin(), c.end(), pair.common.begin() + 17000);
    tests::add(pair.differential, tests::white_noise(pair.differential.size(), 1e-5, seed));
    tests::add(pair.common, tests::white_noise(pair.common.size(), noise_rms, seed + 1000));
    return pair;
}

CmrrQuestion ask(const Pair& pair) {
    CmrrQuestion question;
    question.differential = pair.differential;
    question.common_mode = pair.common;
    question.rate_hz = rate;
    question.differential_drive_dbu = {-40.0, 0.0};
    question.common_mode_drive_dbu = {0.0, 0.0};
    question.frequencies_hz = {997.0};
    return question;
}

TEST(CmrrTest, EightyDecibelsAreFoundTwentyDecibelsUnderTheNoise) {
    // Amplitude 1e-3, RMS 7.07e-4: noise 20 dB above. The amplitude's standard deviation over 10 s is
    // sqrt(2 s^2/N) = 1.4 %: 0.12 dB; 0.3 dB are 2.4 of those, so one seed in 60 may lie outside; none may
    // lie beyond four (0.5 dB).
    int outside = 0, within_stated = 0;
    for (unsigned seed = 0; seed < 6; ++seed) {
        const auto pair = tones(80.0, 7.07e-3, seed);
        const auto figure = common_mode_rejection(ask(pair)).figures.at(0);
        EXPECT_EQ(figure.bound, Bound::exact);
        EXPECT_NEAR(figure.value, 80.0, 0.5);
        outside += std::abs(figure.value - 80.0) > 0.3;
        within_stated += std::abs(figure.value - 80.0) <= figure.uncertainty;
    }
    EXPECT_LE(outside, 1);
    EXPECT_GE(within_stated, 5);
}

// At 8 kHz and 2 s, so that there are many: amplitudes of 0.5 to 6 standard deviations of the noise in them,
// with the tone anywhere in the recording. A bound claims 95 %; a figure its uncertainty.
TEST(CmrrTest, WhatNoiseDrownsIsABoundThatHoldsWhereverTheToneLies) {
    constexpr double slow = 8000.0, noise_rms = 1e-3;
    const std::size_t frames = 16000, whole = 28000;
    const double std = std::sqrt(noise_rms * noise_rms * 2.0 / static_cast<double>(frames));
    int wrong = 0, bounds_of_faint = 0, figures_of_loud = 0;
    constexpr int seeds = 30;
    for (double deviations : {0.5, 2.5, 4.0, 12.0})
        for (unsigned seed = 0; seed < seeds; ++seed) {
            const double amplitude = deviations * std;
            Pair pair{std::vector<double>(whole, 0.0), std::vector<double>(whole, 0.0)};
            const auto d = tests::sine(frames, slow, 997.0, 0.1),
                       c = tests::sine(frames, slow, 997.0, amplitude, 1.0);
            std::copy(d.begin(), d.end(), pair.differential.begin() + 500);
            std::copy(c.begin(), c.end(), pair.common.begin() + 300 * (seed % 38));
            tests::add(pair.differential, tests::white_noise(whole, 1e-5, seed));
            tests::add(pair.common, tests::white_noise(whole, noise_rms, seed + 1000));
            auto question = ask(pair);
            question.rate_hz = slow;
            const auto figure = common_mode_rejection(question).figures.at(0);
            const double truth = 40.0 - units::db_from_ratio(amplitude / 0.1);
            if (figure.bound == Bound::at_least) {
                wrong += figure.value > truth;
                bounds_of_faint += deviations < 1.0;
            } else {
                wrong += std::abs(figure.value - truth) > figure.uncertainty;
                figures_of_loud += deviations > 10.0;
            }
        }
    // 5 % of 120 are 6, with a standard deviation of 2.4: three of those.
    EXPECT_LE(wrong, 13);
    EXPECT_EQ(bounds_of_faint, seeds);
    EXPECT_GE(figures_of_loud, seeds - 2);
}

TEST(CmrrTest, TwoClocksAreFollowedAtEveryTone) {
    constexpr std::size_t frames = 192000;
    const std::vector<double> wanted = {100.0, 997.0, 10000.0};
    for (double ppm : {-20.0, 300.0}) {
        Pair pair{std::vector<double>(frames, 0.0), std::vector<double>(frames, 0.0)};
        for (double hz : wanted) {
            tests::add(pair.differential, tests::sine(frames, rate, hz * (1.0 + ppm * 1e-6), 0.1));
            tests::add(pair.common, tests::sine(frames, rate, hz * (1.0 + ppm * 1e-6), 1e-3, 1.0));
        }
        tests::add(pair.differential, tests::white_noise(frames, 1e-5, 1));
        tests::add(pair.common, tests::white_noise(frames, 1e-4, 2));
        auto question = ask(pair);
        question.frequencies_hz = wanted;
        const auto findings = common_mode_rejection(question);
        for (const auto& figure : findings.figures) {
            EXPECT_EQ(figure.bound, Bound::exact);
            EXPECT_NEAR(figure.value, 80.0, 0.03) << ppm;
        }
        ASSERT_EQ(findings.cautions.size(), 1U);
        EXPECT_NE(findings.cautions[0].find("ppm"), std::string::npos);
        ASSERT_NE(findings.curve("common_mode_rejection"), nullptr);
        EXPECT_EQ(findings.curve("common_mode_rejection")->x, wanted);
    }
}

TEST(CmrrTest, AToneAskedForAmongOthersIsNotDisturbedByThem) {
    constexpr std::size_t frames = 48000;
    signal::Stimulus stimulus;
    stimulus.kind = signal::Multitone{{990.0, 997.0, 1003.0}};
    Pair pair{std::vector<double>(frames, 0.0), std::vector<double>(frames, 0.0)};
    for (double hz : {990.0, 997.0, 1003.0}) {
        tests::add(pair.differential, tests::sine(frames, rate, hz + 0.0, 0.1));
        tests::add(pair.common, tests::sine(frames, rate, hz, hz == 997.0 ? 1e-3 : 1e-2, hz));
    }
    tests::add(pair.common, tests::white_noise(frames, 1e-5, 2));
    tests::add(pair.differential, tests::white_noise(frames, 1e-5, 3));
    auto question = ask(pair);
    question.differential_stimulus = question.common_mode_stimulus = stimulus;
    const auto findings = common_mode_rejection(question);
    ASSERT_EQ(findings.figures.size(), 1U);
    EXPECT_NEAR(findings.figures[0].value, 80.0, 0.02);
}

TEST(CmrrTest, AToneOnAMainsHarmonicIsSaid) {
    auto pair = tones(60.0, 1e-5, 1, 4.0);
    tests::add(pair.common, tests::hum(pair.common.size(), rate, 49.85, 0.0, {1e-3, 2e-4, 5e-4}));
    auto question = ask(pair);
    EXPECT_NEAR(common_mode_rejection(question).figures[0].value, 60.0,
                0.02);  // 997 = 20 * 49.85: no line there
    bool said = false;
    for (const auto& caution : common_mode_rejection(question).cautions)
        said |= caution.find("harmonic 20") != std::string::npos;
    EXPECT_TRUE(said);
    auto apart = tones(60.0, 1e-5, 1, 4.0);
    tests::add(apart.common, tests::hum(apart.common.size(), rate, 50.0, 0.0, {1e-3, 2e-4, 5e-4}));
    EXPECT_TRUE(common_mode_rejection(ask(apart)).cautions.empty());
}

TEST(CmrrTest, LeakageIsSubtractedAsAComplexNumber) {
    auto pair = tones(80.0, 1e-5, 3);
    std::vector<double> leakage(pair.common.size(), 0.0);
    const auto leak = tests::sine(480000, rate, 997.0, 2e-3, -2.0);  // twice the residual, at another phase
    std::copy(leak.begin(), leak.end(), leakage.begin() + 17000);
    tests::add(pair.common, leakage);
    auto question = ask(pair);
    EXPECT_GT(std::abs(common_mode_rejection(question).figures[0].value - 80.0), 2.0);
    question.leakage = leakage;
    EXPECT_NEAR(common_mode_rejection(question).figures[0].value, 80.0, 0.05);
    // A level repeats within 0.1 % between captures: twice 0.2 % of the residual.
    EXPECT_NEAR(common_mode_rejection(question).figures[0].uncertainty, 0.035, 0.01);
}

TEST(CmrrTest, TheFixturesOwnBalanceBoundsTheClaim) {
    const auto pair = tones(95.0, 1e-6, 3);
    auto question = ask(pair);
    question.rejection_limit_db = 100.0;  // 5 dB beyond: most of the residual may be the fixture's
    auto figure = common_mode_rejection(question).figures[0];
    EXPECT_EQ(figure.bound, Bound::at_least);
    // Both adding in phase: 20 lg(10^(-95/20) + 10^(-100/20)).
    EXPECT_NEAR(figure.value,
                -units::db_from_ratio(units::ratio_from_db(-95.0) + units::ratio_from_db(-100.0)), 0.1);
    question.rejection_limit_db = 125.0;  // 30 dB beyond: 0.28 dB of doubt
    figure = common_mode_rejection(question).figures[0];
    EXPECT_EQ(figure.bound, Bound::exact);
    EXPECT_NEAR(figure.uncertainty, 0.28, 0.03);
}

TEST(CmrrTest, ASweepGivesTheCurve) {
    signal::Stimulus stimulus;
    stimulus.kind = signal::Sweep{20.0, 20000.0};
    stimulus.length_s = 3.0;
    stimulus.level_dbfs = -12.0;
    const auto sent = signal::render(stimulus);
    const std::size_t frames = sent.size() + 40000;
    tests::Device amplifier, converter;
    amplifier.delay_frames = converter.delay_frames = 500.2;
    converter.gain = units::ratio_from_db(40.0 - 90.0);  // drives differ by 40 dB
    converter.low_pass_hz = 0.0;
    Pair pair{tests::through(sent, amplifier, rate, frames), tests::through(sent, converter, rate, frames)};
    tests::add(pair.common, tests::white_noise(frames, 1e-5, 2));
    auto question = ask(pair);
    question.frequencies_hz = {100.0, 1000.0};
    question.differential_stimulus = question.common_mode_stimulus = stimulus;
    const auto findings = common_mode_rejection(question);
    for (const auto& figure : findings.figures)
        EXPECT_NEAR(figure.value, 90.0, std::max(figure.uncertainty, 0.1));
    const Curve* curve = findings.curve("common_mode_rejection");
    ASSERT_NE(curve, nullptr);
    EXPECT_GT(curve->x.size(), 100U);
    // At the top of the sweep little energy meets the noise: the stated uncertainty must hold there.
    int inside = 0;
    for (std::size_t k = 0; k < curve->x.size(); ++k)
        inside += std::abs(curve->y[k] - 90.0) <= std::max(curve->uncertainty[k], 0.02);
    EXPECT_GE(inside, static_cast<int>(0.85 * static_cast<double>(curve->x.size())));
}

TEST(CmrrTest, ASweepThatIsNotHeardNeedsRecordingsOfOneKind) {
    signal::Stimulus stimulus;
    stimulus.kind = signal::Sweep{20.0, 20000.0};
    stimulus.length_s = 1.0;
    stimulus.level_dbfs = -12.0;
    const auto sent = signal::render(stimulus);
    tests::Device amplifier;
    amplifier.delay_frames = 500.0;
    Pair pair{tests::through(sent, amplifier, rate, sent.size() + 20000),
              tests::white_noise(sent.size() + 20000, 1e-3, 1)};
    auto question = ask(pair);
    question.frequencies_hz = {1000.0};
    question.differential_stimulus = question.common_mode_stimulus = stimulus;
    EXPECT_EQ(common_mode_rejection(question).figures[0].bound, Bound::at_least);
    pair.common.resize(pair.common.size() + 5000, 1e-4);
    question.common_mode = pair.common;
    EXPECT_THROW(common_mode_rejection(question), CannotMeasure);
}

TEST(CmrrTest, NothingLeftIsRefusedAndNearlyNothingIsABound) {
    auto pair = tones(80.0, 1e-5, 1, 1.0);
    auto question = ask(pair);
    question.leakage = pair.common;  // the same file named twice
    EXPECT_THROW(common_mode_rejection(question), CannotMeasure);
    std::vector<double> still(96000, 0.01);
    still[0] = 0.02;
    question = ask(pair);
    question.common_mode = still;
    const auto figure = common_mode_rejection(question).figures[0];
    EXPECT_EQ(figure.bound, Bound::at_least);
    EXPECT_TRUE(std::isfinite(figure.value));
}

TEST(CmrrTest, MissingTonesAndWordsAreRefused) {
    const auto pair = tones(80.0, 1e-5, 1, 2.0);
    auto question = ask(pair);
    question.frequencies_hz.clear();
    EXPECT_THROW(common_mode_rejection(question), UsageError);
    question.frequencies_hz = {1500.0};
    EXPECT_THROW(common_mode_rejection(question), CannotMeasure);
    for (const std::vector<double>& unfit : {std::vector<double>{30000.0}, {-5.0}, {997.0, 997.0}}) {
        question.frequencies_hz = unfit;
        EXPECT_THROW(common_mode_rejection(question), UsageError);
    }
    question.frequencies_hz = {997.0};
    const std::vector<double> short_leakage(100, 1e-3);
    question.leakage = short_leakage;
    EXPECT_THROW(common_mode_rejection(question), UsageError);
}

}  // namespace
}  // namespace coldpin::measure
