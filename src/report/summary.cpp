#include "summary.h"

#include <algorithm>

#include <fmt/core.h>

namespace coldpin::report {

std::string headline(const check::Run& run) {
    const auto count = [&](check::Verdict verdict) {
        return std::count_if(run.judgements.begin(), run.judgements.end(),
                             [&](const auto& judgement) { return judgement.verdict == verdict; });
    };
    const auto failed = count(check::Verdict::fail), undecided = count(check::Verdict::undecided);
    const auto all = run.judgements.size();
    if (all == 0) return "Nothing was required of this unit, so there is no verdict.";
    if (failed == 0 && undecided == 0) return fmt::format("Meets all {} requirements.", all);
    std::string text = failed > 0
                           ? fmt::format("Fails {} of {} requirements", failed, all)
                           : fmt::format("Meets {} of {} requirements", count(check::Verdict::pass), all);
    if (undecided > 0) text += fmt::format("; {} cannot be decided", undecided);
    return text + ".";
}

std::string group_name(const std::string& unit_channel, const std::string& setting) {
    std::string name;
    if (!unit_channel.empty()) name = "channel " + unit_channel;
    if (!setting.empty()) name += (name.empty() ? "" : ", ") + ("gain setting " + setting);
    return name;
}

std::vector<std::string> all_cautions(const check::Run& run) {
    std::vector<std::string> all;
    const auto add = [&](const std::string& caution) {
        if (std::find(all.begin(), all.end(), caution) == all.end()) all.push_back(caution);
    };
    for (const auto& caution : run.cautions) add(caution);
    for (const auto& step : run.steps) {
        if (!step.failure.empty()) add(step.measure + ": " + step.failure);
        for (const auto& caution : step.findings.cautions) add(step.measure + ": " + caution);
    }
    return all;
}

}  // namespace coldpin::report
