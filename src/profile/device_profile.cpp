#include "coldpin/profile/device_profile.h"

#include <algorithm>

#include <fmt/core.h>

#include "coldpin/signal/text_file.h"

#include "plan_reader.h"
#include "requirement_reader.h"
#include "simulated_reader.h"
#include "toml_reader.h"

namespace coldpin::profile {

namespace {

void read_device(TableReader& table, DeviceProfile& profile) {
    profile.maker = table.text("maker").value_or("");
    profile.description = table.text("description").value_or("");
    profile.channels = table.texts("channels");
    for (std::size_t i = 0; i < profile.channels.size(); ++i)
        for (std::size_t j = 0; j < i; ++j)
            if (profile.channels[i] == profile.channels[j])
                table.fail("channels", "'" + shown(profile.channels[i]) + "' twice",
                           "a name of its own for each channel");
    profile.rated_source_ohms = table.number("rated_source_ohms", {0.0, 1e6}).value_or(150.0);
    profile.cautions = table.texts("cautions");
}

void read_setting(TableReader& table, DeviceProfile& profile) {
    GainSetting setting;
    setting.name = table.text("name").value_or("");
    setting.nominal_gain_db = table.number("nominal_gain_db", {-60.0, 120.0});
    if (profile.find_setting(setting.name) != nullptr)
        table.fail("name", "'" + shown(setting.name) + "' a second time",
                   "a name of its own for each [[setting]]");
    profile.settings.push_back(setting);
}

// The pretended unit has the settings of the profile, or the simulated rig would stop in mid-check.
void read_simulated_unit(TableReader& table, DeviceProfile& profile) {
    profile.simulated = read_simulated_preamp(table);
    const auto& gains = profile.simulated->gain_db_by_setting;
    std::vector<std::string_view> names;
    for (const auto& setting : profile.settings) names.push_back(setting.name);
    for (const auto& [name, gain_db] : gains)
        if (!name.empty() && profile.find_setting(name) == nullptr)
            table.fail("gain_db", "the setting '" + shown(name) + "'", "a declared [[setting]]",
                       did_you_mean(name, names));
    // One gain without a name serves a unit whose control does not matter.
    if (gains.size() == 1 && gains.begin()->first.empty()) return;
    for (const auto& setting : profile.settings)
        if (gains.count(setting.name) == 0 && !setting.name.empty())
            table.fail("gain_db", "no gain for the setting '" + shown(setting.name) + "'",
                       "one for each [[setting]]");
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
    read_schema(top, "device", "a device profile");
    top.allow_only({"schema", "name", "device", "setting", "plan", "requirement", "simulated_unit"});
    DeviceProfile profile;
    profile.source_text = text;
    profile.source_name = source_name;
    profile.name = top.need_text("name");
    top.table("device", [&](TableReader& table) { read_device(table, profile); });
    top.tables("setting", [&](TableReader& table) { read_setting(table, profile); });
    if (profile.settings.empty()) profile.settings.push_back({"", std::nullopt});
    top.tables("plan", [&](TableReader& table) { profile.plan.push_back(read_plan_step(table, profile)); });
    if (profile.plan.empty())
        top.fail_missing("plan", "at least one [[plan]] step that says what to measure");
    top.tables("requirement",
               [&](TableReader& table) { profile.requirements.push_back(read_requirement(table, profile)); });
    top.table("simulated_unit", [&](TableReader& table) { read_simulated_unit(table, profile); });
    return profile;
}

DeviceProfile read_device_profile(const std::filesystem::path& file) {
    DeviceProfile profile = device_profile_from_text(signal::read_text_file(file), file.string());
    profile.source_name = file.filename().string();
    return profile;
}

}  // namespace coldpin::profile
