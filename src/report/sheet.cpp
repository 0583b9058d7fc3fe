#include "coldpin/report/sheet.h"

#include <algorithm>
#include <cmath>
#include <string>
#include <vector>

#include <fmt/core.h>

#include "coldpin/report/words.h"

#include "band_picture.h"
#include "summary.h"
#include "text_layout.h"

namespace coldpin::report {

namespace {

using check::Judgement;
using check::Verdict;

struct Paint {
    bool on = false;
    std::string operator()(const char* code, const std::string& text) const {
        return on ? fmt::format("\033[{}m{}\033[0m", code, text) : text;
    }
};
constexpr const char* bold = "1";
constexpr const char* faint = "2";

const char* code_of(Verdict verdict) {
    switch (verdict) {
        case Verdict::pass:
            return "32";
        case Verdict::fail:
            return "1;31";
        case Verdict::undecided:
            break;
    }
    return "33";
}

// A mark for eyes that skip words: shape differs, not only colour.
std::string verdict_cell(Verdict verdict) {
    switch (verdict) {
        case Verdict::pass:
            return "● pass";
        case Verdict::fail:
            return "▼ FAIL";
        case Verdict::undecided:
            break;
    }
    return "◇ undecided";
}

std::string measured_cell(const Judgement& judgement) {
    if (judgement.figure) {
        const std::string spread = uncertainty_text(*judgement.figure);
        return value_text(*judgement.figure) + (spread.empty() ? "" : "  " + spread);
    }
    if (judgement.worst_frequency_hz) return "nearest at " + frequency_text(*judgement.worst_frequency_hz);
    return "not measured";
}

std::string margin_cell(const Judgement& judgement) {
    if (!judgement.margin || judgement.requirement.quantity == "polarity") return "";
    return margin_text(*judgement.margin);
}

void add_requirements(std::string& out, const check::Run& run, const SheetStyle& style, const Paint& paint) {
    std::string group = "?";
    Table table({"requirement", "limit", "measured", "margin", "", "verdict"},
                style.width < 100 ? std::vector<std::size_t>{4} : std::vector<std::size_t>{});
    table.align_right(3);
    for (const auto& judgement : run.judgements) {
        const std::string name = group_name(judgement.unit_channel, judgement.setting);
        if (name != group) {
            group = name;
            if (!name.empty()) table.heading(name);
        }
        table.row({quantity_text(judgement.requirement.quantity, judgement.requirement.conditions),
                   limit_text(judgement.requirement), measured_cell(judgement), margin_cell(judgement),
                   band_picture_text(judgement), verdict_cell(judgement.verdict)});
        if (paint.on) table.colour_last(code_of(judgement.verdict));
    }
    out += table.text("  ", paint.on);
}

void add_reasons(std::string& out, const check::Run& run, const SheetStyle& style, const Paint& paint) {
    bool first = true;
    for (const auto& judgement : run.judgements) {
        if (judgement.verdict == Verdict::pass) continue;
        if (first) out += "\n" + paint(bold, "What did not pass") + "\n";
        first = false;
        const std::string group = group_name(judgement.unit_channel, judgement.setting);
        std::string sentence = group.empty() ? judgement.sentence : group + ": " + judgement.sentence;
        if (!judgement.requirement.why.empty()) sentence += " " + judgement.requirement.why;
        out += wrapped(sentence, style.width, "  - ", "    ");
    }
}

bool is_required(const check::Run& run, const check::StepResult& step, const measure::Figure& figure) {
    return std::any_of(run.judgements.begin(), run.judgements.end(), [&](const Judgement& judgement) {
        return judgement.setting == step.setting && judgement.unit_channel == step.unit_channel &&
               judgement.figure && *judgement.figure == figure;
    });
}

void add_other_figures(std::string& out, const check::Run& run, const Paint& paint) {
    Table table({"also measured", "", ""}, {});
    std::string group = "?";
    for (const auto& step : run.steps) {
        for (const auto& figure : step.findings.figures) {
            if (is_required(run, step, figure)) continue;
            const std::string name = group_name(step.unit_channel, step.setting);
            if (name != group && !name.empty()) table.heading(name);
            group = name;
            table.row({quantity_text(figure.quantity, figure.conditions), value_text(figure),
                       uncertainty_text(figure)});
        }
    }
    if (table.rows() > 0) out += "\n" + table.text("  ", paint.on);
}

void add_cautions(std::string& out, const check::Run& run, const SheetStyle& style, const Paint& paint) {
    const auto cautions = all_cautions(run);
    if (cautions.empty()) return;
    out += "\n" + paint(bold, "Keep in mind") + "\n";
    for (const auto& caution : cautions) out += wrapped(caution, style.width, "  - ", "    ");
}

}  // namespace

std::string sheet(const check::Run& run, const SheetStyle& style) {
    const Paint paint{style.colour};
    std::string out = "\n";
    const std::string serial = run.serial.empty() ? "no serial number" : "serial " + run.serial;
    out += paint(bold, run.profile.name) + (run.profile.maker.empty() ? "" : " by " + run.profile.maker) +
           ", " + serial + "\n";
    out += paint(faint, fmt::format("{}  ·  rig: {}  ·  {}{}", run.time_utc, run.rig.setup.name, run.backend,
                                    run.operator_name.empty() ? "" : "  ·  by " + run.operator_name)) +
           "\n\n";
    std::string word = check::verdict_name(run.verdict);
    std::transform(word.begin(), word.end(), word.begin(),
                   [](unsigned char c) { return static_cast<char>(std::toupper(c)); });
    out += paint(code_of(run.verdict), "  " + word) + "   " + headline(run) + "\n\n";
    if (!run.judgements.empty()) add_requirements(out, run, style, paint);
    add_reasons(out, run, style, paint);
    add_other_figures(out, run, paint);
    add_cautions(out, run, style, paint);
    if (!run.notes.empty()) out += "\n" + wrapped("Note: " + run.notes, style.width, "  ", "  ");
    out +=
        "\n" +
        paint(faint, fmt::format("± is the expanded uncertainty (k = 2, about 95 %); a verdict counts it in. "
                                 "coldpin {}, {:.1f} s.",
                                 run.tool_version, run.wall_time_s)) +
        "\n";
    return out;
}

std::string findings_text(const measure::Findings& findings, const SheetStyle& style) {
    Table table({findings.kind, "", ""}, {});
    for (const auto& figure : findings.figures)
        table.row({quantity_text(figure.quantity, figure.conditions), value_text(figure),
                   uncertainty_text(figure)});
    std::string out = table.text("", style.colour);
    for (const auto& curve : findings.curves) {
        if (curve.x.empty()) continue;
        out += fmt::format("curve {}: {} points, {} to {} (values with --json)\n", curve.quantity,
                           curve.x.size(), frequency_text(curve.x.front()), frequency_text(curve.x.back()));
    }
    for (const auto& caution : findings.cautions)
        out += wrapped(caution, style.width, "caution: ", "         ");
    return out;
}

}  // namespace coldpin::report
