// Polarity and latency from a stimulus and its recording.
#pragma once

#include <optional>
#include <span>

#include "coldpin/measure/figure.h"
#include "coldpin/signal/stimulus.h"

namespace coldpin::measure {

struct TimingQuestion {
    std::span<const double> recording;
    double rate_hz = 0.0;
    std::optional<signal::Stimulus> stimulus;
    std::span<const double> stimulus_samples = {};
    std::span<const double> reference = {};  // wins over the stimulus as what was sent
};

// Figure polarity (+1 or -1, unit ""); refused (CannotMeasure) when the stimulus is a single tone, whose
// polarity and delay cannot be told apart, or the evidence is weak.
Findings polarity(const TimingQuestion& question);

// Figure latency (frames, fractional): the pure delay, what a first-order high-pass and low-pass leave of the
// phase; also in s as conditions.seconds.
Findings latency(const TimingQuestion& question);

}  // namespace coldpin::measure
