#include "coldpin/signal/description.h"

#include <stdexcept>
#include <system_error>

#include <fmt/core.h>
#include <nlohmann/json.hpp>

#include "coldpin/signal/text_file.h"
#include "coldpin/units/error.h"

namespace coldpin::signal {

namespace {

using Json = nlohmann::ordered_json;
constexpr const char* schema = "coldpin-recording/1";

struct KindToJson {
    Json& json;
    void operator()(const Tone& tone) const { json["frequency_hz"] = tone.frequency_hz; }
    void operator()(const Multitone& multitone) const { json["frequencies_hz"] = multitone.frequencies_hz; }
    void operator()(const Sweep& sweep) const {
        json["from_hz"] = sweep.from_hz;
        json["to_hz"] = sweep.to_hz;
    }
    void operator()(const Silence&) const {}
    void operator()(const Burst& burst) const {
        json["frequency_hz"] = burst.frequency_hz;
        json["cycles"] = burst.cycles;
    }
};

Json stimulus_to_json(const Stimulus& stimulus) {
    Json json;
    json["kind"] = kind_name(stimulus);
    std::visit(KindToJson{json}, stimulus.kind);
    json["length_s"] = stimulus.length_s;
    json["level_dbfs"] = stimulus.level_dbfs;
    json["rate_hz"] = stimulus.rate_hz;
    json["fade_s"] = stimulus.fade_s;
    return json;
}

// Reads members of one object and names file and member when they are not what they should be.
class Members {
  public:
    Members(const Json& json, std::string source, std::string path)
        : json_(json), source_(std::move(source)), path_(std::move(path)) {
        if (!json_.is_object())
            throw UsageError(
                fmt::format("{}: {} should be an object", source_, path_.empty() ? "the text" : path_));
    }
    template <typename T>
    std::optional<T> find(const char* name) const {
        const auto member = json_.find(name);
        if (member == json_.end()) return std::nullopt;
        try {
            return member->get<T>();
        } catch (const Json::exception&) {
            throw UsageError(fmt::format("{}: {}{} has the wrong type ({})", source_,
                                         path_.empty() ? "" : path_ + ".", name, member->type_name()));
        }
    }
    template <typename T>
    T need(const char* name) const {
        auto value = find<T>(name);
        if (!value)
            throw UsageError(
                fmt::format("{}: {}{} is missing", source_, path_.empty() ? "" : path_ + ".", name));
        return *value;
    }

  private:
    const Json& json_;
    std::string source_;
    std::string path_;
};

Stimulus stimulus_from_json(const Json& json, const std::string& source) {
    const Members members(json, source, "stimulus");
    Stimulus stimulus;
    const auto kind = members.need<std::string>("kind");
    if (kind == "tone")
        stimulus.kind = Tone{members.need<double>("frequency_hz")};
    else if (kind == "multitone")
        stimulus.kind = Multitone{members.need<std::vector<double>>("frequencies_hz")};
    else if (kind == "sweep")
        stimulus.kind = Sweep{members.need<double>("from_hz"), members.need<double>("to_hz")};
    else if (kind == "silence")
        stimulus.kind = Silence{};
    else if (kind == "burst")
        stimulus.kind = Burst{members.need<double>("frequency_hz"), members.need<int>("cycles")};
    else
        throw UsageError(fmt::format(
            "{}: stimulus.kind '{}' is unknown; expected tone, multitone, sweep, silence or burst", source,
            kind));
    stimulus.length_s = members.need<double>("length_s");
    stimulus.level_dbfs = members.need<double>("level_dbfs");
    stimulus.rate_hz = members.need<double>("rate_hz");
    stimulus.fade_s = members.need<double>("fade_s");
    try {
        require_valid(stimulus);
    } catch (const UsageError& error) {
        throw UsageError(fmt::format("{}: {}", source, error.what()));
    }
    return stimulus;
}

// The optional members, once: both directions walk the same list.
template <typename Visitor>
void for_each_member(Visitor&& visit) {
    visit("device_channel", &Description::device_channel);
    visit("reference_channel", &Description::reference_channel);
    visit("input_full_scale_dbu", &Description::input_full_scale_dbu);
    visit("input_uncertainty_db", &Description::input_uncertainty_db);
    visit("drive_dbu", &Description::drive_dbu);
    visit("drive_uncertainty_db", &Description::drive_uncertainty_db);
    visit("gain_db", &Description::gain_db);
    visit("gain_uncertainty_db", &Description::gain_uncertainty_db);
    visit("source_ohms", &Description::source_ohms);
    visit("temperature_c", &Description::temperature_c);
    visit("rejection_limit_db", &Description::rejection_limit_db);
    visit("clock_ppm", &Description::clock_ppm);
}

template <typename Visitor>
void for_each_text(Visitor&& visit) {
    visit("feed", &Description::feed);
    visit("setting", &Description::setting);
    visit("unit_channel", &Description::unit_channel);
}

}  // namespace

std::filesystem::path description_path(const std::filesystem::path& wav_file) {
    std::filesystem::path path = wav_file;
    return path.replace_extension(".json");
}

std::string to_json_text(const Description& description) {
    Json json;
    json["schema"] = schema;
    if (description.stimulus) json["stimulus"] = stimulus_to_json(*description.stimulus);
    for_each_text([&](const char* name, auto member) {
        if (!(description.*member).empty()) json[name] = description.*member;
    });
    for_each_member([&](const char* name, auto member) {
        if (description.*member) json[name] = *(description.*member);
    });
    if (!description.remarks.empty()) json["remarks"] = description.remarks;
    return json.dump(2, ' ', false, Json::error_handler_t::replace) + "\n";
}

Description description_from_json_text(const std::string& text, const std::string& source) {
    Json json;
    try {
        json = Json::parse(text);
    } catch (const Json::parse_error& error) {
        throw UsageError(fmt::format("{}: is no JSON: broken at byte {}", source, error.byte));
    } catch (const Json::exception&) {
        throw UsageError(fmt::format("{}: is no JSON that can be read", source));
    }
    const Members members(json, source, "");
    const auto found = members.need<std::string>("schema");
    if (found != schema)
        throw UsageError(fmt::format("{}: has schema '{}'; expected '{}'", source, found, schema));
    Description description;
    if (json.contains("stimulus")) description.stimulus = stimulus_from_json(json.at("stimulus"), source);
    for_each_text([&](const char* name, auto member) {
        if (auto value = members.find<std::string>(name)) description.*member = *value;
    });
    for_each_member([&](const char* name, auto member) {
        using Value = typename std::remove_reference_t<decltype(description.*member)>::value_type;
        description.*member = members.find<Value>(name);
    });
    if (auto remarks = members.find<std::vector<std::string>>("remarks")) description.remarks = *remarks;
    return description;
}

std::optional<Description> read_description(const std::filesystem::path& wav_file) {
    const auto path = description_path(wav_file);
    std::error_code error;
    if (path == wav_file || !std::filesystem::exists(path, error)) return std::nullopt;
    return description_from_json_text(read_text_file(path), path.string());
}

void write_description(const std::filesystem::path& wav_file, const Description& description) {
    write_text_file(description_path(wav_file), to_json_text(description));
}

}  // namespace coldpin::signal
