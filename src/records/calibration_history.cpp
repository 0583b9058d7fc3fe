#include "coldpin/records/calibration_history.h"

#include <cmath>
#include <fstream>
#include <optional>

#include <fmt/core.h>
#include <nlohmann/json.hpp>

#include "coldpin/units/error.h"

namespace coldpin::records {

namespace {

using Json = nlohmann::ordered_json;

// Each number's name and place, so that writing and reading cannot differ.
struct Number {
    const char* name;
    std::optional<double> rig::Calibration::*member;
};
constexpr Number optional_numbers[] = {
    {"common_mode_output_full_scale_dbu", &rig::Calibration::common_mode_output_full_scale_dbu},
    {"reference_full_scale_dbu", &rig::Calibration::reference_full_scale_dbu},
    {"loop_latency_frames", &rig::Calibration::loop_latency_frames},
    {"loop_noise_dbfs", &rig::Calibration::loop_noise_dbfs},
    {"loop_distortion_db", &rig::Calibration::loop_distortion_db},
    {"loop_deviation_db", &rig::Calibration::loop_deviation_db},
    {"loop_crosstalk_db", &rig::Calibration::loop_crosstalk_db},
    {"loop_dc", &rig::Calibration::loop_dc},
};

Json to_json(const rig::Calibration& calibration) {
    Json json = {{"schema", "coldpin-calibration/1"},
                 {"time_utc", calibration.time_utc},
                 {"output_full_scale_dbu", calibration.output_full_scale_dbu},
                 {"output_uncertainty_db", calibration.output_uncertainty_db},
                 {"input_full_scale_dbu", calibration.input_full_scale_dbu},
                 {"input_uncertainty_db", calibration.input_uncertainty_db}};
    for (const Number& number : optional_numbers)
        if (calibration.*number.member) json[number.name] = *(calibration.*number.member);
    json["knobs"] = calibration.knobs;
    json["meter"] = calibration.meter;
    json["remark"] = calibration.remark;
    return json;
}

rig::Calibration from_json(const Json& json) {
    if (json.at("schema") != "coldpin-calibration/1") throw UsageError("another schema");
    rig::Calibration calibration;
    calibration.time_utc = json.at("time_utc").get<std::string>();
    calibration.output_full_scale_dbu = json.at("output_full_scale_dbu").get<double>();
    calibration.output_uncertainty_db = json.at("output_uncertainty_db").get<double>();
    calibration.input_full_scale_dbu = json.at("input_full_scale_dbu").get<double>();
    calibration.input_uncertainty_db = json.at("input_uncertainty_db").get<double>();
    for (const Number& number : optional_numbers)
        if (json.contains(number.name)) calibration.*number.member = json.at(number.name).get<double>();
    calibration.knobs = json.value("knobs", "");
    calibration.meter = json.value("meter", "");
    calibration.remark = json.value("remark", "");
    return calibration;
}

}  // namespace

std::filesystem::path calibration_history_path(const std::filesystem::path& rig_file) {
    std::filesystem::path path = rig_file;
    return path.replace_extension(".calibrations.jsonl");
}

void append_calibration(const std::filesystem::path& rig_file, const rig::Calibration& calibration) {
    const auto path = calibration_history_path(rig_file);
    // A line that a power cut left unfinished is closed first.
    bool unfinished = false;
    if (std::ifstream before(path, std::ios::binary | std::ios::ate); before && before.tellg() > 0) {
        before.seekg(-1, std::ios::end);
        unfinished = before.get() != '\n';
    }
    std::ofstream file(path, std::ios::binary | std::ios::app);
    file << (unfinished ? "\n" : "") << to_json(calibration).dump() << "\n";
    file.flush();
    if (!file)
        throw UsageError(fmt::format("{}: the history of calibrations could not be written", path.string()));
}

CalibrationHistory read_calibrations(const std::filesystem::path& rig_file) {
    CalibrationHistory history;
    std::ifstream file(calibration_history_path(rig_file), std::ios::binary);
    for (std::string line; std::getline(file, line);) {
        if (line.empty()) continue;
        try {
            history.calibrations.push_back(from_json(Json::parse(line)));
        } catch (const std::exception&) {
            ++history.damaged_lines;
        }
    }
    return history;
}

}  // namespace coldpin::records
