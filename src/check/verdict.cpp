#include "coldpin/check/verdict.h"

#include <algorithm>
#include <cmath>

#include <fmt/core.h>

#include "coldpin/profile/quantities.h"
#include "coldpin/units/level.h"

namespace coldpin::check {

namespace {

using measure::Bound;
using measure::Curve;
using measure::Figure;

bool equal(const measure::ConditionValue& a, const measure::ConditionValue& b) {
    const auto *x = std::get_if<double>(&a), *y = std::get_if<double>(&b);
    if (x != nullptr && y != nullptr) return std::abs(*x - *y) <= 1e-6 * std::max(std::abs(*x), std::abs(*y));
    return a == b;
}

bool has(const measure::Conditions& conditions, const measure::Conditions& wanted) {
    return std::all_of(wanted.entries().begin(), wanted.entries().end(), [&](const auto& entry) {
        const auto* value = conditions.find(entry.first);
        return value != nullptr && equal(*value, entry.second);
    });
}

// The figure in the unit the requirement speaks of.
Figure in_unit(Figure figure, const std::string& unit) {
    if (figure.unit == unit || figure.unit != "dBu") return figure;
    if (unit == "dBV") {
        figure.value = units::dbv_from_dbu(figure.value);
        figure.unit = unit;
    } else if (unit == "V") {
        figure.value = units::volts_rms_from_dbu(figure.value);
        figure.uncertainty = figure.value * figure.uncertainty / units::db_per_relative_amplitude;
        figure.unit = unit;
    }
    return figure;
}

double margin_of(double value, std::optional<double> min, std::optional<double> max) {
    if (min && max) return std::min(value - *min, *max - value);
    return min ? value - *min : *max - value;
}

std::string limits_in_words(const profile::Requirement& requirement) {
    const std::string unit = requirement.unit.empty() ? "" : " " + requirement.unit;
    if (requirement.min && requirement.max)
        return fmt::format("{:g} to {:g}{} is asked", *requirement.min, *requirement.max, unit);
    if (requirement.min) return fmt::format("at least {:g}{} is asked", *requirement.min, unit);
    return fmt::format("at most {:g}{} is asked", *requirement.max, unit);
}

std::string words_of(const profile::Requirement& requirement) {
    const auto* quantity = profile::find_quantity(requirement.quantity);
    std::string words = quantity != nullptr ? std::string(quantity->words) : requirement.quantity;
    words.front() = static_cast<char>(std::toupper(static_cast<unsigned char>(words.front())));
    if (const auto* weighting = requirement.conditions.find("weighting")) {
        const auto* name = std::get_if<std::string>(weighting);
        if (name != nullptr) words += *name == "none" ? ", unweighted" : ", " + *name + "-weighted";
    }
    if (const auto* frequency = requirement.conditions.find("frequency_hz"))
        if (const auto* hz = std::get_if<double>(frequency)) words += fmt::format(" at {:g} Hz", *hz);
    if (const auto* harmonic = requirement.conditions.find("harmonic"))
        if (const auto* number = std::get_if<double>(harmonic)) words += fmt::format(" {:g}", *number);
    return words;
}

std::string figure_sentence(const profile::Requirement& requirement, const Figure& figure, Verdict verdict) {
    const std::string unit = figure.unit.empty() ? "" : " " + figure.unit;
    const char* bound =
        figure.bound == Bound::at_least ? "at least " : (figure.bound == Bound::at_most ? "at most " : "");
    const std::string spread = figure.bound == Bound::exact && figure.uncertainty > 0.0
                                   ? fmt::format(" ± {:.2g}{}", figure.uncertainty, unit)
                                   : "";
    const char* end = ".";
    if (verdict == Verdict::undecided)
        end = figure.bound == Bound::exact ? ": the limit lies inside the uncertainty."
                                           : ": more cannot be said with this rig.";
    return fmt::format("{} is {}{:.2f}{}{}; {}{}", words_of(requirement), bound, figure.value, unit, spread,
                       limits_in_words(requirement), end);
}

std::optional<double> interpolated(const std::vector<profile::MaskPoint>& mask, double hz,
                                   std::optional<double> profile::MaskPoint::*limit) {
    const profile::MaskPoint* below = nullptr;
    for (const auto& point : mask) {
        if (!(point.*limit)) continue;
        if (std::abs(point.frequency_hz - hz) <= 1e-6 * hz) return point.*limit;
        if (point.frequency_hz < hz) {
            below = &point;
            continue;
        }
        if (below == nullptr) return std::nullopt;
        const double part =
            std::log(hz / below->frequency_hz) / std::log(point.frequency_hz / below->frequency_hz);
        return *(below->*limit) + part * (*(point.*limit) - *(below->*limit));
    }
    return std::nullopt;
}

// Frequencies at which a curve is only a lower bound.
bool is_lower_bound(const Curve& curve, double hz) {
    const auto* listed = curve.conditions.find("at_least_at_hz");
    const auto* frequencies = listed != nullptr ? std::get_if<std::vector<double>>(listed) : nullptr;
    return frequencies != nullptr &&
           std::find(frequencies->begin(), frequencies->end(), hz) != frequencies->end();
}

void judge_curve(Judgement& judgement, const Curve& curve) {
    bool failed = false, open = false;
    double worst_y = 0.0;
    for (std::size_t k = 0; k < curve.x.size(); ++k) {
        const auto min = interpolated(judgement.requirement.mask, curve.x[k], &profile::MaskPoint::min);
        const auto max = interpolated(judgement.requirement.mask, curve.x[k], &profile::MaskPoint::max);
        if (!min && !max) continue;
        Figure point;
        point.value = curve.y[k];
        if (is_lower_bound(curve, curve.x[k])) point.bound = Bound::at_least;
        point.uncertainty = k < curve.uncertainty.size() ? curve.uncertainty[k] : 0.0;
        const Verdict verdict = decide(point, min, max);
        failed = failed || verdict == Verdict::fail;
        open = open || verdict == Verdict::undecided;
        const double margin = margin_of(point.value, min, max);
        if (judgement.margin && margin >= *judgement.margin) continue;
        judgement.margin = margin;
        judgement.worst_frequency_hz = curve.x[k];
        worst_y = point.value;
    }
    if (!judgement.margin) {
        judgement.sentence = words_of(judgement.requirement) + " was not measured where the mask asks.";
        return;
    }
    judgement.verdict = failed ? Verdict::fail : (open ? Verdict::undecided : Verdict::pass);
    const std::string place =
        fmt::format("{:.4g} Hz ({:.2f} {})", *judgement.worst_frequency_hz, worst_y, curve.y_unit);
    if (judgement.verdict == Verdict::pass)
        judgement.sentence = fmt::format("{} stays inside its mask, nearest to it at {}.",
                                         words_of(judgement.requirement), place);
    else if (judgement.verdict == Verdict::fail)
        judgement.sentence = fmt::format("{} leaves its mask, worst at {}, by {:.2f}.",
                                         words_of(judgement.requirement), place, -*judgement.margin);
    else
        judgement.sentence = fmt::format("{} touches its mask within the uncertainty at {}.",
                                         words_of(judgement.requirement), place);
}

}  // namespace

std::string verdict_name(Verdict verdict) {
    switch (verdict) {
        case Verdict::pass:
            return "pass";
        case Verdict::fail:
            return "fail";
        case Verdict::undecided:
            break;
    }
    return "undecided";
}

Verdict decide(const Figure& figure, std::optional<double> min, std::optional<double> max) {
    // What the true value may be, at the least and at the most.
    const bool open_above = figure.bound == Bound::at_least, open_below = figure.bound == Bound::at_most;
    const double low = figure.value - figure.uncertainty, high = figure.value + figure.uncertainty;
    const bool passes_min = !min || (!open_below && low >= *min),
               passes_max = !max || (!open_above && high <= *max);
    if (passes_min && passes_max) return Verdict::pass;
    const bool fails_min = min && !open_above && high < *min, fails_max = max && !open_below && low > *max;
    return fails_min || fails_max ? Verdict::fail : Verdict::undecided;
}

Judgement judge(const profile::Requirement& requirement, const std::string& setting,
                const std::string& unit_channel, const std::vector<const measure::Findings*>& findings) {
    Judgement judgement;
    judgement.requirement = requirement;
    judgement.setting = setting;
    judgement.unit_channel = unit_channel;
    if (!requirement.mask.empty()) {
        for (const auto* found : findings) {
            if (const Curve* curve = found->curve(requirement.quantity)) {
                judge_curve(judgement, *curve);
                return judgement;
            }
        }
    }
    for (const auto* found : findings) {
        for (const Figure& figure : found->figures) {
            if (figure.quantity != requirement.quantity || !has(figure.conditions, requirement.conditions))
                continue;
            judgement.figure = in_unit(figure, requirement.unit);
            if (judgement.figure->unit != requirement.unit) {
                judgement.sentence = fmt::format("{} is known in {} only; {}.", words_of(requirement),
                                                 figure.unit, limits_in_words(requirement));
                return judgement;
            }
            judgement.verdict = decide(*judgement.figure, requirement.min, requirement.max);
            judgement.margin = margin_of(judgement.figure->value, requirement.min, requirement.max);
            judgement.sentence = figure_sentence(requirement, *judgement.figure, judgement.verdict);
            return judgement;
        }
    }
    judgement.sentence = words_of(requirement) + " was not measured, so nothing can be said about it.";
    return judgement;
}

Verdict overall(const std::vector<Judgement>& judgements) {
    const auto any = [&](Verdict verdict) {
        return std::any_of(judgements.begin(), judgements.end(),
                           [&](const auto& one) { return one.verdict == verdict; });
    };
    if (any(Verdict::fail)) return Verdict::fail;
    return judgements.empty() || any(Verdict::undecided) ? Verdict::undecided : Verdict::pass;
}

}  // namespace coldpin::check
