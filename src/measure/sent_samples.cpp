#include "sent_samples.h"

#include <fmt/core.h>

#include "coldpin/units/error.h"

namespace coldpin::measure {

SentSamples::SentSamples(std::span<const double> recording, double rate_hz,
                         const std::optional<signal::Stimulus>& stimulus, std::span<const double> samples,
                         std::span<const double> reference) {
    question_.recording = recording;
    question_.rate_hz = rate_hz;
    if (!reference.empty()) {
        if (reference.size() != recording.size())
            throw UsageError("the reference channel must be as long as the recording");
        question_.sent = reference;
        // The reference holds the stimulus with its own delay: only what frequencies it spans is of use.
        question_.stimulus = stimulus;
        return;
    }
    if (stimulus) {
        if (stimulus->rate_hz != rate_hz)
            throw UsageError(
                fmt::format("the recording is at {:g} Hz, its stimulus at {:g} Hz: they must be the same",
                            rate_hz, stimulus->rate_hz));
        rendered_ = signal::render(*stimulus);
        question_.sent = rendered_;
        question_.stimulus = stimulus;
        return;
    }
    if (samples.empty())
        throw UsageError("what was sent is unknown: name it (--stimulus S.wav, or --reference-channel N)");
    question_.sent = samples;
}

}  // namespace coldpin::measure
