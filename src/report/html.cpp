#include "coldpin/report/html.h"

#include <algorithm>
#include <cmath>
#include <map>
#include <set>

#include <fmt/core.h>

#include "coldpin/report/words.h"

#include "band_picture.h"
#include "chart.h"
#include "html_style.h"
#include "run_charts.h"
#include "summary.h"

namespace coldpin::report {

namespace {

using check::Judgement;

std::string verdict_mark(check::Verdict verdict) {
    switch (verdict) {
        case check::Verdict::pass:
            return "● pass";
        case check::Verdict::fail:
            return "▼ fail";
        case check::Verdict::undecided:
            break;
    }
    return "◇ undecided";
}

void add_header(std::string& out, const check::Run& run) {
    const std::string word = check::verdict_name(run.verdict);
    out += fmt::format(
        "<header><div><h1>{}</h1><p class=\"soft\">{}{}</p></div><div><p><b>{}</b></p><p "
        "class=\"soft\">{}{}</p></div></header>\n",
        escaped(run.profile.name), escaped(run.profile.maker.empty() ? "" : run.profile.maker + ". "),
        escaped(run.profile.description),
        run.serial.empty() ? "no serial number" : "serial " + escaped(run.serial), escaped(run.time_utc),
        run.operator_name.empty() ? "" : "<br>by " + escaped(run.operator_name));
    out += fmt::format(
        "<section class=\"outcome {0}\"><span class=\"verdict {0}\">{0}</span><span>{1}</span></section>\n",
        word, escaped(headline(run)));
}

void add_row(std::string& out, const Judgement& judgement) {
    const std::string word = check::verdict_name(judgement.verdict);
    const bool explain = judgement.verdict != check::Verdict::pass;
    std::string measured = "not measured";
    if (judgement.figure)
        measured = escaped(value_text(*judgement.figure)) + " <span class=\"soft\">" +
                   escaped(uncertainty_text(*judgement.figure)) + "</span>";
    else if (judgement.worst_frequency_hz)
        measured = "nearest at " + frequency_text(*judgement.worst_frequency_hz);
    const bool has_margin = judgement.margin && judgement.requirement.quantity != "polarity";
    const std::string why =
        explain ? judgement.sentence + " " + judgement.requirement.why : judgement.requirement.why;
    out += fmt::format(
        "<tr class=\"{}\"><td class=\"name\">{}</td><td class=\"number limit\">{}</td><td "
        "class=\"number\">{}</td>"
        "<td class=\"picture\">{}</td><td class=\"number margin\">{}</td><td class=\"word\"><span "
        "class=\"verdict {}\">{}</span></td></tr>\n",
        why.empty() ? "" : "has-why",
        escaped(quantity_text(judgement.requirement.quantity, judgement.requirement.conditions)),
        escaped(limit_text(judgement.requirement)), measured, band_picture_svg(judgement),
        has_margin ? margin_text(*judgement.margin) : "", word, verdict_mark(judgement.verdict));
    if (!why.empty()) out += fmt::format("<tr class=\"why\"><td colspan=\"6\">{}</td></tr>\n", escaped(why));
}

void add_requirements(std::string& out, const check::Run& run) {
    if (run.judgements.empty()) return;
    out += "<h2>Requirements</h2>\n";
    std::string group;
    bool open = false;
    for (const auto& judgement : run.judgements) {
        const std::string name = group_name(judgement.unit_channel, judgement.setting);
        if (!open || name != group) {
            if (open) out += "</tbody></table>\n";
            if (!name.empty()) out += fmt::format("<h3>{}</h3>\n", escaped(name));
            out +=
                "<table class=\"stack\"><thead><tr><th>what</th><th>limit</th><th>measured</th><th>where in "
                "the limits</th><th>margin</th>"
                "<th>verdict</th></tr></thead><tbody>\n";
            open = true;
            group = name;
        }
        add_row(out, judgement);
    }
    out +=
        "</tbody></table>\n<p class=\"soft\">± is the expanded uncertainty (k = 2, about 95 %). A verdict "
        "counts it in: a figure "
        "whose uncertainty reaches over the limit is undecided.</p>\n";
}

void add_figures(std::string& out, const check::Run& run) {
    out +=
        "<details open><summary>Every "
        "figure</summary>\n<table><thead><tr><th>what</th><th>value</th><th>uncertainty</th></tr></"
        "thead><tbody>\n";
    std::string group;
    for (const auto& step : run.steps) {
        const std::string name = group_name(step.unit_channel, step.setting);
        if (name != group && !name.empty())
            out += fmt::format("<tr><td colspan=\"3\"><b>{}</b></td></tr>\n", escaped(name));
        group = name;
        for (const auto& figure : step.findings.figures)
            out +=
                fmt::format("<tr><td>{}</td><td class=\"number\">{}</td><td class=\"number\">{}</td></tr>\n",
                            escaped(quantity_text(figure.quantity, figure.conditions)),
                            escaped(value_text(figure)), escaped(uncertainty_text(figure)));
    }
    out += "</tbody></table></details>\n";
}

void add_cautions(std::string& out, const check::Run& run) {
    const auto cautions = all_cautions(run);
    if (cautions.empty()) return;
    out += "<h2>Keep in mind</h2>\n<ul class=\"plain\">\n";
    for (const auto& caution : cautions) out += fmt::format("<li>{}</li>\n", escaped(caution));
    out += "</ul>\n";
}

void add_conditions(std::string& out, const check::Run& run) {
    const auto& setup = run.rig.setup;
    const auto item = [&](const std::string& name, const std::string& value) {
        if (!value.empty()) out += fmt::format("<dt>{}</dt><dd>{}</dd>\n", escaped(name), escaped(value));
    };
    out += "<h2>Conditions</h2>\n<dl>\n";
    item("rig", setup.name);
    item("audio path", run.backend);
    item("fixture", fmt::format("{}: {:.2f} dB differential, {:.2f} dB common mode, source {:g} ohm",
                                setup.fixture.name, setup.fixture.differential_loss_db,
                                setup.fixture.common_mode_loss_db, setup.fixture.source_ohms));
    if (setup.calibration) {
        item("calibration",
             fmt::format(
                 "output full scale {:.2f} dBu ± {:.2f} dB, input full scale {:.2f} dBu ± {:.2f} dB{}{}",
                 setup.calibration->output_full_scale_dbu, setup.calibration->output_uncertainty_db,
                 setup.calibration->input_full_scale_dbu, setup.calibration->input_uncertainty_db,
                 setup.calibration->time_utc.empty() ? "" : ", " + setup.calibration->time_utc,
                 setup.calibration->remark.empty() ? "" : ", " + setup.calibration->remark));
    }
    item("temperature of the source", fmt::format("{:g} °C", setup.temperature_c));
    item("device profile", run.profile.source_name);
    item("rig file", run.rig.source_name);
    std::string tags;
    for (const auto& tag : run.tags) tags += (tags.empty() ? "" : ", ") + tag;
    item("tags", tags);
    item("note", run.notes);
    item("program", "coldpin " + run.tool_version);
    out += "</dl>\n";
    out +=
        "<details><summary>Captures</summary>\n<table><thead><tr><th>recording</th><th>feed</th><th>length</"
        "th><th>takes</th><th>remarks</th>"
        "</tr></thead><tbody>\n";
    for (const auto& capture : run.captures) {
        std::string remarks;
        for (const auto& remark : capture.take.description.remarks)
            remarks += (remarks.empty() ? "" : "; ") + remark;
        const double length_s =
            static_cast<double>(capture.take.recording.frames()) / capture.take.recording.rate_hz;
        out += fmt::format(
            "<tr><td>{}</td><td>{}</td><td class=\"number\">{:.2f} s</td><td>{}</td><td>{}</td></tr>\n",
            escaped(capture.take.name), escaped(capture.take.description.feed), length_s, capture.takes,
            escaped(remarks));
    }
    out += "</tbody></table></details>\n";
    out += fmt::format("<details><summary>Device profile as used</summary><pre>{}</pre></details>\n",
                       escaped(run.profile.source_text));
    out += fmt::format("<details><summary>Rig file as used</summary><pre>{}</pre></details>\n",
                       escaped(run.rig.source_text));
}

}  // namespace

std::string html(const check::Run& run) {
    std::string out =
        "<!doctype html>\n<html lang=\"en\"><head><meta charset=\"utf-8\">\n"
        "<meta name=\"viewport\" content=\"width=device-width, initial-scale=1\">\n";
    out += fmt::format("<title>{}, {}: {}</title>\n<style>{}</style></head><body>\n",
                       escaped(run.profile.name), run.serial.empty() ? "no serial" : escaped(run.serial),
                       check::verdict_name(run.verdict), html_style);
    add_header(out, run);
    add_requirements(out, run);
    const std::string charts = run_charts(run);
    if (!charts.empty()) out += "<h2>Curves</h2>\n<div class=\"charts\">\n" + charts + "</div>\n";
    add_cautions(out, run);
    add_figures(out, run);
    add_conditions(out, run);
    out += "<p class=\"soft\">This sheet replaces no licensed electrical safety test.</p>\n</body></html>\n";
    return out;
}

}  // namespace coldpin::report
