#include "coldpin/check/hum_search.h"

#include <algorithm>
#include <cctype>
#include <cmath>

#include <fmt/core.h>

#include "coldpin/measure/hum.h"
#include "coldpin/units/error.h"
#include "coldpin/units/level.h"

namespace coldpin::check {

namespace {

struct Stage {
    HumPlace place;
    rig::Plug plug;
    const char* instruction;
    const char* words;  // how it is called in sentences
    const char* advice;
};

constexpr Stage stages[] = {
    {HumPlace::interface, rig::Plug::input_terminated,
     "Unplug the unit from input {0} and put a termination (150 ohm, or a short) into input {0}.",
     "the interface itself",
     "Another USB port or supply, the computer on battery, the interface away from transformers."},
    {HumPlace::ground_loop, rig::Plug::unit_off,
     "Take the termination out and plug the unit's output into input {0}; the unit stays switched off.",
     "the loop through shields, computer and mains",
     "One outlet strip for computer, interface and unit; the computer on battery; a USB isolator or an "
     "isolating "
     "transformer in the line; balanced lines. Never lift a safety earth."},
    {HumPlace::unit, rig::Plug::unit_terminated,
     "Switch the unit on, with a termination (150 ohm) at its input and nothing of the generator near it.",
     "the unit",
     "Its supply (50/60 Hz with 100/120 Hz and even harmonics: rectifier and reservoir; 50/60 Hz pure: the "
     "transformer's "
     "field), its wiring, its lid."},
    {HumPlace::fixture, rig::Plug::both,
     "Take the termination out and connect the fixture to the unit's input, as for a check; nothing plays.",
     "fixture and generator",
     "The fixture's box, its distance from transformers, the shield of its cable, the loop from the "
     "interface's output to "
     "its input through the unit."},
};

double power(double level_db) {
    return units::power_ratio_from_db(level_db);
}

}  // namespace

std::string hum_place_name(HumPlace place) {
    static const char* const names[] = {"interface", "ground_loop", "unit", "fixture"};
    return names[static_cast<std::size_t>(place)];
}

HumSearchReport search_hum(rig::Session& session, Bench& bench, const HumSearchOptions& options) {
    const rig::Setup& setup = session.setup();
    const int input = setup.routing.device_inputs.front();
    const double rate = setup.audio.sample_rate_hz;
    HumSearchReport report;
    report.findings.kind = "hum_search";
    for (std::size_t k = 0; k < std::size(stages); ++k) {
        const Stage& stage = stages[k];
        bench.progress(stage.words, k, std::size(stages));
        const rig::Wiring wiring{stage.plug, options.setting, ""};
        if (!session.prepare(wiring)) {
            bench.ask(fmt::format(fmt::runtime(stage.instruction), input));
            session.confirm(wiring);
        }
        const std::vector<double> nothing(static_cast<std::size_t>((options.length_s + 0.2) * rate), 0.0);
        const auto heard = session.play_raw(setup.routing.differential_output, nothing, input);
        const auto channel = heard.channel(input).subspan(static_cast<std::size_t>(0.2 * rate));
        measure::HumQuestion question;
        question.recording = channel;
        question.rate_hz = rate;
        question.band.high_hz = std::min(20000.0, 0.45 * rate);
        question.mains_hz = options.mains_hz;
        if (setup.calibration) question.scale.full_scale_dbu = setup.calibration->input_full_scale_dbu;
        HumStep step;
        step.place = stage.place;
        step.findings = measure::hum(question);
        if (const auto* figure = step.findings.figure("hum_output")) {
            step.uncertainty_db = figure->uncertainty;
            (figure->bound == measure::Bound::exact ? step.level : step.at_most) = figure->value;
            measure::Figure listed = *figure;
            listed.conditions.set("step", hum_place_name(stage.place));
            report.findings.figures.push_back(listed);
        }
        report.steps.push_back(std::move(step));
    }
    bench.progress("done", std::size(stages), std::size(stages));

    // What each step adds, as power, beyond what both readings doubt and a decibel of the one before.
    const char* unit = setup.calibration ? "dBu" : "dBFS";
    double most = 0.0, before = 0.0, doubt_before = 0.0;
    for (std::size_t k = 0; k < report.steps.size(); ++k) {
        HumStep& step = report.steps[k];
        const double here = step.level ? power(*step.level) : 0.0;
        const double doubt = here * (power(step.uncertainty_db) - 1.0);
        const double added = here - before;
        if (step.level && added > std::max(2.0 * std::hypot(doubt, doubt_before), 0.26 * before)) {
            step.added = units::db_from_power_ratio(added);
            report.findings.figures.push_back(
                {"hum_added",
                 *step.added,
                 unit,
                 units::db_from_power_ratio(1.0 + std::hypot(doubt, doubt_before) / added),
                 2.0,
                 measure::Bound::exact,
                 {{"place", hum_place_name(step.place)}}});
            if (added > most) {
                most = added;
                report.most = step.place;
            }
        } else if (before > 0.0 && here < 0.7 * before) {
            report.sentences.push_back(
                fmt::format("With {} the hum falls by {:.1f} dB: two hums cancel in part, so what is named "
                            "here is only about.",
                            stages[k].words, units::db_from_power_ratio(before / std::max(here, 1e-30))));
        }
        before = here;
        doubt_before = doubt;
    }
    if (!report.most) {
        report.sentences.insert(report.sentences.begin(), "No step adds hum that stands out of the noise.");
    } else {
        const Stage& stage = stages[static_cast<std::size_t>(*report.most)];
        report.sentences.insert(report.sentences.begin(),
                                fmt::format("Most of the hum enters with {}: {:.1f} {}. {}", stage.words,
                                            units::db_from_power_ratio(most), unit, stage.advice));
        for (const HumStep& step : report.steps)
            if (step.added && step.place != *report.most)
                report.sentences.push_back(fmt::format("{} adds {:.1f} {}.",
                                                       stages[static_cast<std::size_t>(step.place)].words,
                                                       *step.added, unit));
    }
    for (auto& sentence : report.sentences)
        if (!sentence.empty())
            sentence[0] = static_cast<char>(std::toupper(static_cast<unsigned char>(sentence[0])));
    report.findings.cautions = report.sentences;
    return report;
}

}  // namespace coldpin::check
