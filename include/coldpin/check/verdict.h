// Verdicts: a figure with its uncertainty against a limit.
#pragma once

#include <optional>
#include <string>
#include <vector>

#include "coldpin/measure/figure.h"
#include "coldpin/profile/device_profile.h"

namespace coldpin::check {

enum class Verdict { pass, fail, undecided };
std::string verdict_name(Verdict verdict);  // "pass", "fail", "undecided"

// One requirement on one figure (or on a curve).
struct Judgement {
    profile::Requirement requirement;
    std::string setting;
    std::string unit_channel;
    Verdict verdict = Verdict::undecided;
    std::optional<measure::Figure> figure;     // absent when nothing was measured, or for a mask
    std::optional<double> margin;              // distance to the nearest limit, positive inside, in the unit
    std::optional<double> worst_frequency_hz;  // for a mask: where the margin is smallest
    std::string sentence;                      // one plain sentence
};

// Conforms when min + U <= y <= max - U, fails when y < min - U or y > max + U, undecided between
// (ISO 14253-1 decision rule). An at_least value can pass a minimum but never fail it; likewise at_most.
Verdict decide(const measure::Figure& figure, std::optional<double> min, std::optional<double> max);

// A requirement against the findings of its setting and channel. Units are converted (dBu, dBV, V).
Judgement judge(const profile::Requirement& requirement, const std::string& setting,
                const std::string& unit_channel, const std::vector<const measure::Findings*>& findings);

// fail beats undecided beats pass; nothing judged is undecided.
Verdict overall(const std::vector<Judgement>& judgements);

}  // namespace coldpin::check
