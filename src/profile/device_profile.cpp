#include "coldpin/profile/device_profile.h"

#include <algorithm>

#include <fmt/core.h>

#include "coldpin/profile/quantities.h"
#include "coldpin/signal/text_file.h"
#include "coldpin/units/error.h"

#include "simulated_reader.h"
#include "toml_reader.h"

namespace coldpin::profile {

namespace {

constexpr const char* schema = "coldpin-device/1";
constexpr Range frequencies = {0.1, 96000.0};
constexpr Range levels_dbu = {-160.0, 40.0};

std::string did_you_mean(std::string_view word, const std::vector<std::string_view>& candidates) {
    const std::string near = nearest_word(word, candidates);
    return near.empty() ? "" : "; did you mean '" + near + "'?";
}

std::vector<std::string_view> setting_names(const DeviceProfile& profile) {
    std::vector<std::string_view> names;
    for (const auto& setting : profile.settings) names.push_back(setting.name);
    return names;
}

void read_device(TableReader& table, DeviceProfile& profile) {
    profile.maker = table.text("maker").value_or("");
    profile.description = table.text("description").value_or("");
    profile.channels = table.texts("channels");
    profile.rated_source_ohms = table.number("rated_source_ohms", {0.0, 1e6}).value_or(150.0);
    profile.cautions = table.texts("cautions");
}

void read_setting(TableReader& table, DeviceProfile& profile) {
    GainSetting setting;
    setting.name = table.text("name").value_or("");
    setting.nominal_gain_db = table.number("nominal_gain_db", {-60.0, 120.0});
    if (profile.find_setting(setting.name) != nullptr)
        table.fail("name", fmt::format("the setting '{}' stands here twice", setting.name));
    profile.settings.push_back(setting);
}

// The setting of a step or requirement: one that is declared; empty where there is only one.
std::string read_setting_name(TableReader& table, const DeviceProfile& profile, bool may_be_all) {
    const auto name = table.text("setting");
    if (!name) {
        if (may_be_all || profile.settings.size() == 1)
            return may_be_all ? "" : profile.settings.front().name;
        table.fail("", fmt::format("'setting' is missing: this unit has {} settings of its gain control",
                                   profile.settings.size()));
    }
    if (profile.find_setting(*name) == nullptr)
        table.fail("setting", fmt::format("'{}' is not declared as a [[setting]]{}", *name,
                                          did_you_mean(*name, setting_names(profile))));
    return *name;
}

void read_mask(TableReader& table, Requirement& requirement) {
    table.tables("mask", [&](TableReader& point) {
        MaskPoint mask;
        mask.frequency_hz = point.need_number("frequency_hz", frequencies);
        mask.min = point.number("min");
        mask.max = point.number("max");
        if (!mask.min && !mask.max) point.fail("", "a mask point needs min or max");
        if (mask.min && mask.max && *mask.min > *mask.max)
            point.fail("min", fmt::format("min {:g} is above max {:g}", *mask.min, *mask.max));
        if (!requirement.mask.empty() && mask.frequency_hz <= requirement.mask.back().frequency_hz)
            point.fail("frequency_hz", "mask points must rise in frequency");
        requirement.mask.push_back(mask);
    });
}

void read_conditions(TableReader& table, const Quantity& quantity, Requirement& requirement) {
    for (std::string_view condition : quantity.conditions) {
        const std::string name(condition);
        if (condition == "weighting") {
            const std::string value = table.choice("weighting", {"none", "A", "C", "468"}, "none");
            requirement.conditions.set(name, value);
        } else if (condition == "detector") {
            requirement.conditions.set(name, table.choice("detector", {"rms"}, "rms"));
        } else if (const auto value = table.number(condition, frequencies)) {
            requirement.conditions.set(name, *value);
        }
    }
}

bool measures(const PlanStep& step, const Requirement& requirement, const Quantity& quantity) {
    return step.measure == quantity.measure &&
           (requirement.setting.empty() || step.setting == requirement.setting);
}

void read_requirement(TableReader& table, DeviceProfile& profile) {
    Requirement requirement;
    requirement.line = table.line();
    requirement.quantity = table.need_text("quantity");
    std::vector<std::string_view> names;
    for (const auto& one : quantities()) names.push_back(one.name);
    const Quantity* quantity = find_quantity(requirement.quantity);
    if (quantity == nullptr)
        table.fail("quantity", fmt::format("there is no quantity '{}'{}", requirement.quantity,
                                           did_you_mean(requirement.quantity, names)));
    requirement.setting = read_setting_name(table, profile, true);
    read_conditions(table, *quantity, requirement);
    requirement.min = table.number("min");
    requirement.max = table.number("max");
    read_mask(table, requirement);
    if (requirement.min && requirement.max && *requirement.min > *requirement.max)
        table.fail("min", fmt::format("min {:g} is above max {:g}", *requirement.min, *requirement.max));
    if (quantity->is_curve && requirement.mask.empty())
        table.fail("", fmt::format("'{}' is a curve: it needs a mask", requirement.quantity));
    if (!quantity->is_curve && !requirement.mask.empty())
        table.fail("mask", fmt::format("'{}' is one figure: it takes min and max", requirement.quantity));
    if (!quantity->is_curve && !requirement.min && !requirement.max)
        table.fail("", "a requirement needs min or max");
    requirement.unit = table.choice("unit", quantity->units, quantity->units.front());
    requirement.why = table.text("why").value_or("");
    if (std::none_of(profile.plan.begin(), profile.plan.end(),
                     [&](const PlanStep& step) { return measures(step, requirement, *quantity); }))
        table.fail("quantity",
                   fmt::format("no [[plan]] step measures '{}'{}: add one with measure = \"{}\"",
                               requirement.quantity,
                               requirement.setting.empty() ? "" : " at setting '" + requirement.setting + "'",
                               quantity->measure));
    profile.requirements.push_back(std::move(requirement));
}

void read_step(TableReader& table, DeviceProfile& profile) {
    PlanStep step;
    step.line = table.line();
    step.measure = table.choice("measure", measure_kinds(), "");
    if (step.measure.empty())
        table.fail("",
                   "'measure' is missing, expected gain, response, noise, hum, cmrr, polarity or latency");
    step.setting = read_setting_name(table, profile, false);
    step.drive_dbu = table.number("drive_dbu", levels_dbu);
    step.common_mode_drive_dbu = table.number("common_mode_drive_dbu", levels_dbu);
    step.frequencies_hz = table.numbers("frequencies_hz", frequencies);
    step.from_hz = table.number("from_hz", frequencies);
    step.to_hz = table.number("to_hz", frequencies);
    if (step.from_hz && step.to_hz && *step.from_hz >= *step.to_hz)
        table.fail("from_hz",
                   fmt::format("from {:g} Hz must lie below to {:g} Hz", *step.from_hz, *step.to_hz));
    step.length_s = table.number("length_s", {0.05, 120.0});
    const auto band = table.numbers("band_hz", {0.0, 96000.0});
    if (!band.empty() && (band.size() != 2 || band[0] >= band[1]))
        table.fail("band_hz", "expected two frequencies, low and high");
    if (band.size() == 2) step.band = {band[0], band[1]};
    step.mains_hz = table.number("mains_hz", {10.0, 500.0});
    step.stimulus = table.choice("stimulus", {"tones", "sweep"}, "tones");
    profile.plan.push_back(std::move(step));
}

}  // namespace

const GainSetting* DeviceProfile::find_setting(const std::string& setting) const {
    const auto found = std::find_if(settings.begin(), settings.end(),
                                    [&](const GainSetting& one) { return one.name == setting; });
    return found != settings.end() ? &*found : nullptr;
}

DeviceProfile device_profile_from_text(const std::string& text, const std::string& source_name) {
    const toml::table document = parse_toml(text, source_name);
    TableReader top(document, source_name, "");
    const std::string found = top.need_text("schema");
    if (found != schema)
        top.fail("schema", fmt::format("found '{}', expected '{}' (a device profile)", found, schema));
    DeviceProfile profile;
    profile.source_text = text;
    profile.source_name = source_name;
    profile.name = top.need_text("name");
    top.table("device", [&](TableReader& table) { read_device(table, profile); });
    top.tables("setting", [&](TableReader& table) { read_setting(table, profile); });
    if (profile.settings.empty()) profile.settings.push_back({"", std::nullopt});
    top.tables("plan", [&](TableReader& table) { read_step(table, profile); });
    if (profile.plan.empty()) top.fail("", "there is no [[plan]] step: nothing would be measured");
    top.tables("requirement", [&](TableReader& table) { read_requirement(table, profile); });
    top.table("simulated_unit",
              [&](TableReader& table) { profile.simulated = read_simulated_preamp(table); });
    top.finish();
    return profile;
}

DeviceProfile read_device_profile(const std::filesystem::path& file) {
    DeviceProfile profile = device_profile_from_text(signal::read_text_file(file), file.string());
    profile.source_name = file.filename().string();
    return profile;
}

}  // namespace coldpin::profile
