#include "coldpin/measure/timing.h"

#include <gtest/gtest.h>

#include "coldpin/units/error.h"

#include "kit/signals.h"

namespace coldpin::measure {
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
    const std::size_t frames = sent.size() + 60000;
    auto x = tests::through(sent, device, rate, frames);
    tests::add(x, tests::white_noise(frames, units::sample_rms_from_dbfs(noise_dbfs), seed));
    return x;
}

TimingQuestion ask(const std::vector<double>& x, const signal::Stimulus& stimulus) {
    TimingQuestion question;
    question.recording = x;
    question.rate_hz = rate;
    question.stimulus = stimulus;
    return question;
}

TEST(TimingTest, LatencyIsThePureDelayWhateverTheCorners) {
    const auto stimulus = stimulus_of(signal::Sweep{20.0, 20000.0});
    unsigned seed = 0;
    for (double delay : {0.0, 12.5, 391.37, 5000.25, 48000.9})
        for (const auto& [low, high, order] :
             {std::tuple{0.0, 0.0, 1}, std::tuple{10.0, 60000.0, 1}, std::tuple{10.0, 80000.0, 1},
              std::tuple{30.0, 15000.0, 1}, std::tuple{5.0, 70000.0, 2}}) {
            tests::Device device;
            device.delay_frames = delay;
            device.high_pass_hz = low;
            device.low_pass_hz = high;
            device.order = order;
            const auto figure =
                latency(ask(recorded(stimulus, device, -80.0, ++seed), stimulus)).figures.at(0);
            EXPECT_NEAR(figure.value, delay, 0.05) << low << " " << high << " " << order;
            EXPECT_GT(figure.uncertainty, 0.0);
            EXPECT_LT(figure.uncertainty, 0.1);
        }
}

TEST(TimingTest, PolarityIsAlwaysRight) {
    const signal::Stimulus stimuli[] = {
        stimulus_of(signal::Sweep{20.0, 20000.0}), stimulus_of(signal::Sweep{100.0, 8000.0}, 1.0),
        stimulus_of(signal::Multitone{{100.0, 230.0, 570.0, 997.0, 1310.0, 2110.0, 3307.0, 5003.0, 7919.0}}),
        stimulus_of(signal::Burst{2000.0, 3}, 0.2)};
    unsigned seed = 100;
    for (const auto& stimulus : stimuli)
        for (double delay : {0.5, 100.0, 2000.73})
            for (double gain : {0.3, -0.3})
                for (double low : {0.0, 20.0}) {
                    tests::Device device;
                    device.gain = gain;
                    device.delay_frames = delay;
                    device.high_pass_hz = low;
                    device.low_pass_hz = 40000.0;
                    EXPECT_EQ(polarity(ask(recorded(stimulus, device, -80.0, ++seed), stimulus))
                                  .figures.at(0)
                                  .value,
                              gain > 0.0 ? 1.0 : -1.0)
                        << signal::kind_name(stimulus) << " " << delay << " " << gain;
                }
}

TEST(TimingTest, ASingleToneCannotTell) {
    const auto tone = stimulus_of(signal::Tone{997.0});
    EXPECT_THROW(polarity(ask(recorded(tone, {}, -80.0, 1), tone)), CannotMeasure);
    EXPECT_THROW(latency(ask(recorded(tone, {}, -80.0, 1), tone)), CannotMeasure);
}

TEST(TimingTest, NoiseAloneTellsNothing) {
    const auto stimulus = stimulus_of(signal::Sweep{20.0, 20000.0});
    for (unsigned seed = 0; seed < 20; ++seed)
        EXPECT_THROW(polarity(ask(tests::white_noise(160000, 0.1, seed), stimulus)), CannotMeasure);
}

}  // namespace
}  // namespace coldpin::measure
