#include "coldpin/measure/timing.h"

#include <cmath>

#include <fmt/core.h>

#include "coldpin/measure/clipping.h"
#include "coldpin/units/error.h"

#include "delay_model.h"
#include "sent_samples.h"

namespace coldpin::measure {

namespace {

constexpr double least_confidence = 0.35;  // of the response agreeing with one polarity; noise reaches 0.1

DelayFit delay_of(const TimingQuestion& question) {
    SentSamples sent(question.recording, question.rate_hz, question.stimulus, question.stimulus_samples,
                     question.reference);
    return fit_delay(transfer(sent.question()));
}

}  // namespace

Findings polarity(const TimingQuestion& question) {
    const DelayFit fit = delay_of(question);
    if (fit.confidence < least_confidence)
        throw CannotMeasure(
            "polarity cannot be told: the response turns through all phases within the stimulus; use a sweep "
            "over the middle of the band");
    Findings findings;
    findings.kind = "polarity";
    findings.figures.push_back({"polarity", static_cast<double>(fit.polarity), "", 0.0, 2.0, Bound::exact,
                                Conditions{{"confidence", fit.confidence}}});
    return findings;
}

Findings latency(const TimingQuestion& question) {
    const DelayFit fit = delay_of(question);
    Findings findings;
    findings.kind = "latency";
    findings.figures.push_back(
        {"latency", fit.frames, "frames", 2.0 * fit.std_frames, 2.0, Bound::exact,
         Conditions{{"seconds", fit.frames / question.rate_hz}, {"rate_hz", question.rate_hz}}});
    return findings;
}

}  // namespace coldpin::measure
