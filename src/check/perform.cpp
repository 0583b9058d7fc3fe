#include "coldpin/check/perform.h"

#include <algorithm>
#include <chrono>
#include <map>
#include <utility>

#include <fmt/core.h>

#include "coldpin/check/preflight.h"
#include "coldpin/check/ranging.h"
#include "coldpin/profile/quantities.h"
#include "coldpin/units/error.h"

#include "instructions.h"

namespace coldpin::check {

namespace {

using Place = std::pair<std::string, std::string>;  // unit channel, setting

AnalysisOptions options_for(const profile::PlanStep& step) {
    AnalysisOptions options;
    options.band = step.band;
    options.mains_hz = step.mains_hz;
    return options;
}

// Appends the findings of a further capture of the same step (gain at several frequencies).
void append(measure::Findings& all, measure::Findings&& more) {
    if (all.kind.empty()) all.kind = more.kind;
    std::move(more.figures.begin(), more.figures.end(), std::back_inserter(all.figures));
    std::move(more.curves.begin(), more.curves.end(), std::back_inserter(all.curves));
    for (auto& caution : more.cautions)
        if (std::find(all.cautions.begin(), all.cautions.end(), caution) == all.cautions.end())
            all.cautions.push_back(std::move(caution));
}

void analyse_step(StepResult& result, const Run& run) {
    const auto& step = run.profile.plan.at(result.plan_step);
    result.findings = {};
    result.findings.kind = step.measure;
    result.failure.clear();
    try {
        AnalysisInputs inputs;
        if (step.measure == "cmrr") {
            inputs.main = &run.captures.at(result.captures.at(0)).take;
            inputs.common_mode = &run.captures.at(result.captures.at(1)).take;
            result.findings = analyse(step.measure, inputs, options_for(step));
            return;
        }
        for (std::size_t capture : result.captures) {
            inputs.main = &run.captures.at(capture).take;
            append(result.findings, analyse(step.measure, inputs, options_for(step)));
        }
    } catch (const CannotMeasure& error) {
        result.failure = error.what();
    }
}

void judge_all(Run& run) {
    run.judgements.clear();
    std::vector<Place> places;
    for (const auto& step : run.steps) {
        const Place place{step.unit_channel, step.setting};
        if (std::find(places.begin(), places.end(), place) == places.end()) places.push_back(place);
    }
    for (const auto& [channel, setting] : places) {
        for (const auto& requirement : run.profile.requirements) {
            if (!requirement.setting.empty() && requirement.setting != setting) continue;
            const auto* quantity = profile::find_quantity(requirement.quantity);
            std::vector<const measure::Findings*> findings;
            bool planned = false;
            for (const auto& step : run.steps) {
                if (step.unit_channel != channel || step.setting != setting) continue;
                findings.push_back(&step.findings);
                planned = planned || (quantity != nullptr && step.measure == quantity->measure);
            }
            // A requirement for every setting is asked where its measurement was planned.
            if (planned) run.judgements.push_back(judge(requirement, setting, channel, findings));
        }
    }
    run.verdict = overall(run.judgements);
}

// The gain of each place once it is known.
void note_gain(std::map<Place, measure::Figure>& gains, const StepResult& step) {
    const auto* gain = step.measure == "gain" ? step.findings.figure("gain") : nullptr;
    if (gain != nullptr) gains[{step.unit_channel, step.setting}] = *gain;
}

void bring_about(const rig::Wiring& wiring, const std::optional<rig::Wiring>& before, rig::Session& session,
                 Bench& bench) {
    if (session.prepare(wiring)) return;
    if (before)
        for (const auto& sentence : instructions(*before, wiring, session.setup())) bench.ask(sentence);
    session.confirm(wiring);
}

// A unit without rejection turns an ordinary common-mode drive into a clipped recording: that is a finding
// about the unit, to be measured with less drive, not a reason to give up.
rig::Capture capture_within_range(rig::CaptureRequest& request, rig::Session& session,
                                  std::vector<std::string>& cautions) {
    constexpr double step_db = 20.0;
    constexpr int most_steps = 3;
    for (int lowered = 0;; ++lowered) {
        try {
            return session.capture(request);
        } catch (const rig::InputClipped&) {
            if (request.feed != rig::Feed::common_mode || lowered == most_steps) throw;
        }
        request.drive_dbu -= step_db;
        cautions.push_back(
            fmt::format("{}: the recording clipped, so the common-mode drive was lowered to {:g} dBu: this "
                        "unit rejects very little",
                        request.label, request.drive_dbu));
    }
}

// By how much the drives of a place are raised, what none of its peaks may exceed, and the gain seen.
struct Raise {
    double by_db = 0.0, most_dbu = 0.0, gain_db = 0.0;
};

// All differential drives of a place move together, so that its captures stay comparable; a drive that the
// plan names stays.
void raise_level(CapturePlan& plan, std::size_t index, const profile::DeviceProfile& profile,
                 rig::Session& session, Run& run, std::map<Place, Raise>& ranges) {
    PlannedCapture& planned = plan.captures[index];
    rig::CaptureRequest& request = planned.request;
    if (request.feed != rig::Feed::differential) return;
    const bool named = std::any_of(plan.steps.begin(), plan.steps.end(), [&](const PlannedStep& step) {
        return std::find(step.captures.begin(), step.captures.end(), index) != step.captures.end() &&
               profile.plan.at(step.plan_step).drive_dbu.has_value();
    });
    if (named) return;
    const Place place{planned.unit_channel, request.wiring.setting};
    if (ranges.count(place) == 0) {
        const double start_dbu = request.drive_dbu - 14.0;
        const DriveRange range = find_drive(session, request.device_input, start_dbu);
        ranges[place] = {range.drive_dbu - request.drive_dbu, range.drive_dbu,
                         range.output_dbu - range.drive_dbu};
        run.cautions.push_back(
            fmt::format("{}level found: {:.1f} dBu at the input, {:.1f} dBu at the output, limited by {}",
                        request.wiring.setting.empty() ? "" : "setting " + request.wiring.setting + ": ",
                        range.drive_dbu, range.output_dbu, range.limited_by));
        run.cautions.insert(run.cautions.end(), range.sentences.begin(), range.sentences.end());
    }
    // A multitone's peak lies above that of a tone of its level.
    constexpr double crest_db = 6.0;
    const bool many = std::holds_alternative<signal::Multitone>(request.stimulus.kind);
    request.drive_dbu =
        std::min(request.drive_dbu + ranges[place].by_db, ranges[place].most_dbu - (many ? crest_db : 0.0));
    request.expected_gain_db = ranges[place].gain_db;  // as measured: the limit at the output still holds
}

// For the probe: the level of the first capture, within every limit of the rig.
double loudest_drive_dbu(const rig::CaptureRequest& first, const rig::Setup& setup) {
    double drive = first.feed == rig::Feed::differential ? first.drive_dbu : -60.0;
    if (setup.limits.max_preamp_input_dbu) drive = std::min(drive, *setup.limits.max_preamp_input_dbu);
    return drive;
}

// Wiring first: a plug in the wrong socket would pass for a knob that moved.
void look_ahead(const profile::DeviceProfile& profile, rig::Session& session,
                const rig::CaptureRequest& first, const RunDetails& details,
                std::vector<std::string>& cautions) {
    const rig::Setup& setup = session.setup();
    if (setup.audio.backend == rig::BackendKind::stored || first.wiring.plug == rig::Plug::common_mode_feed)
        return;
    for (const auto& finding :
         preflight(session, profile, first.wiring.setting, first.device_input).findings) {
        if (finding.spoils) throw CannotMeasure(finding.sentence);
        cautions.push_back(finding.sentence);
    }
    constexpr double least_rate_hz = 16000.0;  // of the probe
    if (!setup.routing.reference_input || setup.audio.sample_rate_hz < least_rate_hz) return;
    // As loud as the run itself, so that what happens at its level is seen.
    const double level_dbfs = std::min(
        -3.0, session.converter_level_dbfs(rig::Feed::differential, loudest_drive_dbu(first, setup)));
    const rig::PathReport path = session.check_path(level_dbfs);
    session.set_clock_ppm(path.finding(rig::PathFault::two_clocks) != nullptr ? path.clock_ppm
                                                                              : std::nullopt);
    for (const auto& finding : path.findings) {
        if (finding.spoils && !details.accept_path) throw CannotMeasure(finding.sentence);
        cautions.push_back(finding.sentence);
    }
}

}  // namespace

std::string Bench::answer(const std::string& question) {
    throw UsageError(fmt::format("nobody is there to answer: \"{}\"", question));
}

Run perform(const profile::DeviceProfile& profile, const profile::RigFile& rig, rig::Session& session,
            Bench& bench, const RunDetails& details) {
    const auto begun = std::chrono::steady_clock::now();
    CapturePlan plan = plan_captures(profile, session);
    Run run;
    run.tool_version = details.tool_version;
    run.time_utc = details.time_utc;
    run.serial = details.serial;
    run.operator_name = details.operator_name;
    run.notes = details.notes;
    run.tags = details.tags;
    run.profile = profile;
    run.rig = rig;
    run.rig.setup = session.setup();
    run.backend = session.backend_description();
    for (const auto& step : plan.steps)
        run.steps.push_back({step.plan_step,
                             profile.plan.at(step.plan_step).measure,
                             step.setting,
                             step.unit_channel,
                             step.captures,
                             {},
                             ""});

    std::map<Place, measure::Figure> gains;
    std::map<Place, Raise> ranges;
    std::optional<rig::Wiring> wiring;
    if (details.preflight && !plan.captures.empty()) {
        const rig::CaptureRequest& first = plan.captures.front().request;
        bench.progress("wiring and path", 0, plan.captures.size());
        bring_about(first.wiring, wiring, session, bench);
        wiring = first.wiring;
        look_ahead(profile, session, first, details, run.cautions);
    }
    for (std::size_t i = 0; i < plan.captures.size(); ++i) {
        rig::CaptureRequest& request = plan.captures[i].request;
        bench.progress(request.label, i, plan.captures.size());
        bring_about(request.wiring, wiring, session, bench);
        wiring = request.wiring;
        const auto gain = gains.find({plan.captures[i].unit_channel, request.wiring.setting});
        if (gain != gains.end()) {
            request.gain_db = gain->second.value;
            request.gain_uncertainty_db = gain->second.uncertainty;
        }
        if (details.auto_level) raise_level(plan, i, profile, session, run, ranges);
        rig::Capture capture = capture_within_range(request, session, run.cautions);
        run.captures.push_back(
            {{capture.label, std::move(capture.recording), std::move(capture.description)}, capture.takes});
        for (auto& step : run.steps) {
            const bool complete = std::all_of(step.captures.begin(), step.captures.end(),
                                              [&](std::size_t c) { return c <= i; });
            if (!complete || std::find(step.captures.begin(), step.captures.end(), i) == step.captures.end())
                continue;
            analyse_step(step, run);
            note_gain(gains, step);
        }
        if (capture.takes > 1)
            run.cautions.push_back(fmt::format("{} was taken {} times: damaged takes were thrown away",
                                               capture.label, capture.takes));
    }
    bench.progress("done", plan.captures.size(), plan.captures.size());
    judge_all(run);
    run.wall_time_s = std::chrono::duration<double>(std::chrono::steady_clock::now() - begun).count();
    return run;
}

void analyse_again(Run& run) {
    for (auto& step : run.steps) analyse_step(step, run);
    judge_all(run);
}

}  // namespace coldpin::check
