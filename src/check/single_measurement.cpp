#include "coldpin/check/single_measurement.h"

#include <algorithm>

#include <fmt/core.h>

#include "coldpin/profile/quantities.h"
#include "coldpin/units/error.h"

namespace coldpin::check {

namespace {

constexpr double harmless_drive_dbu = -60.0;

[[noreturn]] void unknown(const char* what, const std::string& word,
                          const std::vector<std::string_view>& choices) {
    const std::string near = profile::nearest_word(word, choices);
    throw UsageError(fmt::format("there is no {} '{}'{}", what, word,
                                 near.empty() ? "" : ": did you mean '" + near + "'?"));
}

std::vector<std::string_view> setting_names(const profile::DeviceProfile& device) {
    std::vector<std::string_view> names;
    for (const auto& setting : device.settings) names.push_back(setting.name);
    return names;
}

profile::DeviceProfile unit_without_profile(const SingleMeasurement& wanted) {
    profile::DeviceProfile device;
    device.name = "a unit without a profile";
    device.settings.push_back({"", wanted.nominal_gain_db});
    device.source_name = "no profile";
    return device;
}

}  // namespace

profile::DeviceProfile profile_for(const SingleMeasurement& wanted, const profile::DeviceProfile* given) {
    const auto& kinds = profile::measure_kinds();
    if (std::find(kinds.begin(), kinds.end(), wanted.kind) == kinds.end())
        unknown("measurement", wanted.kind, {kinds.begin(), kinds.end()});

    profile::DeviceProfile device = given != nullptr ? *given : unit_without_profile(wanted);
    if (!wanted.setting.empty() && device.find_setting(wanted.setting) == nullptr)
        unknown("gain setting", wanted.setting, setting_names(device));
    if (!wanted.unit_channel.empty()) {
        const auto& names = device.channels;
        if (std::find(names.begin(), names.end(), wanted.unit_channel) == names.end())
            unknown("channel of the unit", wanted.unit_channel, {names.begin(), names.end()});
        device.channels = {wanted.unit_channel};
    } else if (device.channels.size() > 1) {
        device.channels.resize(1);
    }

    const auto fits = [&](const profile::PlanStep& step, const std::string& kind,
                          const std::string& setting) {
        return step.measure == kind && (setting.empty() || step.setting == setting);
    };
    const auto planned = [&](const std::string& kind, const std::string& setting) {
        const auto found = std::find_if(device.plan.begin(), device.plan.end(),
                                        [&](const auto& step) { return fits(step, kind, setting); });
        profile::PlanStep step;
        if (found != device.plan.end()) return *found;
        step.measure = kind;
        step.setting = setting.empty() ? device.settings.front().name : setting;
        return step;
    };

    profile::PlanStep step = planned(wanted.kind, wanted.setting);
    if (wanted.drive_dbu) step.drive_dbu = wanted.drive_dbu;
    if (wanted.common_mode_drive_dbu) step.common_mode_drive_dbu = wanted.common_mode_drive_dbu;
    if (!wanted.frequencies_hz.empty()) step.frequencies_hz = wanted.frequencies_hz;
    if (wanted.length_s) step.length_s = wanted.length_s;
    if (wanted.mains_hz) step.mains_hz = wanted.mains_hz;
    if (wanted.band) step.band = *wanted.band;
    if (wanted.source_ohms) device.rated_source_ohms = *wanted.source_ohms;
    const profile::GainSetting* setting = device.find_setting(step.setting);
    const bool gain_known = setting != nullptr && setting->nominal_gain_db.has_value();
    if (!step.drive_dbu && !gain_known) step.drive_dbu = harmless_drive_dbu;

    std::vector<profile::PlanStep> plan;
    if (wanted.kind == "noise" || wanted.kind == "hum") {
        profile::PlanStep gain = planned("gain", step.setting);
        if (!gain.drive_dbu && !gain_known) gain.drive_dbu = step.drive_dbu;
        plan.push_back(gain);
    }
    plan.push_back(step);
    device.plan = plan;
    device.requirements.clear();
    return device;
}

}  // namespace coldpin::check
