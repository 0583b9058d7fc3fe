#include "run_json.h"

#include <fmt/core.h>
#include <nlohmann/json.hpp>

#include "coldpin/measure/findings_json.h"
#include "coldpin/records/run_folder.h"
#include "coldpin/units/error.h"

namespace coldpin::records {

namespace {

using Json = nlohmann::ordered_json;
constexpr const char* schema = "coldpin-run/1";

Json calibration_json(const rig::Setup& setup) {
    if (!setup.calibration) return nullptr;
    const auto& calibration = *setup.calibration;
    Json json;
    json["output_full_scale_dbu"] = calibration.output_full_scale_dbu;
    json["output_uncertainty_db"] = calibration.output_uncertainty_db;
    if (calibration.common_mode_output_full_scale_dbu)
        json["common_mode_output_full_scale_dbu"] = *calibration.common_mode_output_full_scale_dbu;
    json["input_full_scale_dbu"] = calibration.input_full_scale_dbu;
    json["input_uncertainty_db"] = calibration.input_uncertainty_db;
    if (calibration.reference_full_scale_dbu)
        json["reference_full_scale_dbu"] = *calibration.reference_full_scale_dbu;
    if (!calibration.time_utc.empty()) json["time_utc"] = calibration.time_utc;
    if (!calibration.remark.empty()) json["remark"] = calibration.remark;
    return json;
}

Json requirement_json(const check::Judgement& judgement) {
    const auto& requirement = judgement.requirement;
    Json json;
    json["quantity"] = requirement.quantity;
    json["setting"] = judgement.setting;
    if (!judgement.unit_channel.empty()) json["unit_channel"] = judgement.unit_channel;
    Json conditions = Json::object();
    for (const auto& [name, value] : requirement.conditions.entries())
        std::visit([&, &key = name](const auto& plain) { conditions[key] = plain; }, value);
    json["conditions"] = conditions;
    if (requirement.min) json["min"] = *requirement.min;
    if (requirement.max) json["max"] = *requirement.max;
    for (const auto& point : requirement.mask) {
        Json mask;
        mask["frequency_hz"] = point.frequency_hz;
        if (point.min) mask["min"] = *point.min;
        if (point.max) mask["max"] = *point.max;
        json["mask"].push_back(mask);
    }
    json["unit"] = requirement.unit;
    if (!requirement.why.empty()) json["why"] = requirement.why;
    json["verdict"] = check::verdict_name(judgement.verdict);
    if (judgement.figure) json["figure"] = measure::to_json(*judgement.figure);
    if (judgement.margin) json["margin"] = *judgement.margin;
    if (judgement.worst_frequency_hz) json["worst_frequency_hz"] = *judgement.worst_frequency_hz;
    json["sentence"] = judgement.sentence;
    return json;
}

Json steps_json(const check::Run& run) {
    Json steps = Json::array();
    for (const auto& step : run.steps) {
        Json json;
        json["measure"] = step.measure;
        json["plan_step"] = step.plan_step;
        json["setting"] = step.setting;
        if (!step.unit_channel.empty()) json["unit_channel"] = step.unit_channel;
        json["captures"] = Json::array();
        for (std::size_t capture : step.captures)
            json["captures"].push_back(run.captures.at(capture).take.name);
        if (!step.failure.empty()) json["failure"] = step.failure;
        json["findings"] = measure::to_json(step.findings);
        steps.push_back(json);
    }
    return steps;
}

std::size_t capture_named(const check::Run& run, const std::string& name, const std::string& source) {
    for (std::size_t i = 0; i < run.captures.size(); ++i)
        if (run.captures[i].take.name == name) return i;
    throw UsageError(fmt::format("{}: a step refers to the capture '{}', which is not listed", source, name));
}

check::Verdict verdict_from_name(const std::string& name, const std::string& source) {
    for (check::Verdict verdict : {check::Verdict::pass, check::Verdict::fail, check::Verdict::undecided})
        if (name == check::verdict_name(verdict)) return verdict;
    throw UsageError(fmt::format("{}: verdict '{}' is unknown", source, name));
}

void read_judgements(check::Run& run, const Json& list, const std::string& source) {
    for (const auto& json : list) {
        check::Judgement judgement;
        judgement.setting = json.at("setting").get<std::string>();
        judgement.unit_channel = json.value("unit_channel", "");
        auto& requirement = judgement.requirement;
        requirement.quantity = json.at("quantity").get<std::string>();
        requirement.unit = json.at("unit").get<std::string>();
        requirement.why = json.value("why", "");
        for (const auto& [name, value] : json.at("conditions").items()) {
            if (value.is_number())
                requirement.conditions.set(name, value.get<double>());
            else
                requirement.conditions.set(name, value.get<std::string>());
        }
        if (json.contains("min")) requirement.min = json.at("min").get<double>();
        if (json.contains("max")) requirement.max = json.at("max").get<double>();
        for (const auto& mask : json.value("mask", Json::array())) {
            profile::MaskPoint point{mask.at("frequency_hz").get<double>(), std::nullopt, std::nullopt};
            if (mask.contains("min")) point.min = mask.at("min").get<double>();
            if (mask.contains("max")) point.max = mask.at("max").get<double>();
            requirement.mask.push_back(point);
        }
        judgement.verdict = verdict_from_name(json.at("verdict").get<std::string>(), source);
        if (json.contains("figure")) judgement.figure = measure::figure_from_json(json.at("figure"), source);
        if (json.contains("margin")) judgement.margin = json.at("margin").get<double>();
        if (json.contains("worst_frequency_hz"))
            judgement.worst_frequency_hz = json.at("worst_frequency_hz").get<double>();
        judgement.sentence = json.at("sentence").get<std::string>();
        run.judgements.push_back(std::move(judgement));
    }
}

check::Run read(const Json& json, const std::string& source) {
    if (json.at("schema").get<std::string>() != schema)
        throw UsageError(fmt::format("{}: schema '{}'; expected '{}'", source,
                                     json.at("schema").get<std::string>(), schema));
    check::Run run;
    run.tool_version = json.at("tool_version").get<std::string>();
    run.time_utc = json.at("time_utc").get<std::string>();
    run.serial = json.at("serial").get<std::string>();
    run.operator_name = json.at("operator").get<std::string>();
    run.notes = json.at("notes").get<std::string>();
    run.tags = json.at("tags").get<std::vector<std::string>>();
    const auto& device = json.at("device_profile");
    run.profile = profile::device_profile_from_text(device.at("text").get<std::string>(),
                                                    device.at("file").get<std::string>());
    const auto& rig = json.at("rig");
    run.rig = profile::rig_from_text(rig.at("text").get<std::string>(), rig.at("file").get<std::string>());
    run.backend = rig.at("audio").get<std::string>();
    for (const auto& capture : json.at("captures")) {
        check::RunCapture one;
        one.take.name = capture.at("name").get<std::string>();
        one.takes = capture.at("takes").get<int>();
        run.captures.push_back(std::move(one));
    }
    for (const auto& step : json.at("steps")) {
        check::StepResult result;
        result.plan_step = step.at("plan_step").get<std::size_t>();
        result.measure = step.at("measure").get<std::string>();
        if (result.plan_step >= run.profile.plan.size())
            throw UsageError(fmt::format("{}: a step refers to plan step {}, which the profile does not have",
                                         source, result.plan_step));
        result.setting = step.at("setting").get<std::string>();
        result.unit_channel = step.value("unit_channel", "");
        for (const auto& name : step.at("captures"))
            result.captures.push_back(capture_named(run, name.get<std::string>(), source));
        result.failure = step.value("failure", "");
        result.findings = measure::findings_from_json(step.at("findings"), source);
        run.steps.push_back(std::move(result));
    }
    read_judgements(run, json.at("requirements"), source);
    run.verdict = verdict_from_name(json.at("verdict").get<std::string>(), source);
    run.cautions = json.at("cautions").get<std::vector<std::string>>();
    run.wall_time_s = json.at("wall_time_s").get<double>();
    return run;
}

}  // namespace

Json to_json(const check::Run& run) {
    Json json;
    json["schema"] = schema;
    json["tool_version"] = run.tool_version;
    json["time_utc"] = run.time_utc;
    json["serial"] = run.serial;
    json["operator"] = run.operator_name;
    json["notes"] = run.notes;
    json["tags"] = run.tags;
    json["verdict"] = check::verdict_name(run.verdict);
    json["requirements"] = Json::array();
    for (const auto& judgement : run.judgements) json["requirements"].push_back(requirement_json(judgement));
    json["cautions"] = run.cautions;
    json["device_profile"] = {
        {"name", run.profile.name}, {"file", run.profile.source_name}, {"text", run.profile.source_text}};
    json["rig"] = {{"name", run.rig.setup.name},
                   {"file", run.rig.source_name},
                   {"audio", run.backend},
                   {"text", run.rig.source_text}};
    // What there is not is left out, here as everywhere.
    if (run.rig.setup.calibration) json["calibration"] = calibration_json(run.rig.setup);
    json["captures"] = Json::array();
    for (const auto& capture : run.captures)
        json["captures"].push_back({{"name", capture.take.name},
                                    {"file", "recordings/" + capture.take.name + ".wav"},
                                    {"feed", capture.take.description.feed},
                                    {"rate_hz", capture.take.recording.rate_hz},
                                    {"frames", capture.take.recording.frames()},
                                    {"channels", capture.take.recording.channels.size()},
                                    {"takes", capture.takes}});
    json["steps"] = steps_json(run);
    json["wall_time_s"] = run.wall_time_s;
    return json;
}

check::Run run_from_json(const std::string& text, const std::string& source) {
    try {
        return read(Json::parse(text), source);
    } catch (const Json::exception& error) {
        throw UsageError(fmt::format("{}: is damaged: {}", source, error.what()));
    }
}

std::string run_to_json_text(const check::Run& run) {
    return to_json(run).dump(2, ' ', false, Json::error_handler_t::replace) + "\n";
}

}  // namespace coldpin::records
