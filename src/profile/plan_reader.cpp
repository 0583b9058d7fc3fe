#include "plan_reader.h"

#include <algorithm>

#include <fmt/core.h>

#include "coldpin/profile/quantities.h"

namespace coldpin::profile {

namespace {

constexpr Range levels_dbu = {-160.0, 40.0};
constexpr Range lengths_s = {0.05, 120.0};
constexpr double sweep_default_low_hz = 10.0;

// Keys that mean something to one kind of step only. Read and ignored elsewhere, they would promise what is
// not done.
struct SpecialKey {
    std::string_view key;
    std::vector<std::string_view> kinds;
};
const std::vector<SpecialKey>& special_keys() {
    static const std::vector<SpecialKey> all = {
        {"drive_dbu", {"gain", "response", "cmrr", "distortion", "polarity", "latency"}},
        {"common_mode_drive_dbu", {"cmrr"}},
        {"frequencies_hz", {"gain", "cmrr"}},
        {"from_hz", {"response", "cmrr", "polarity", "latency"}},
        {"to_hz", {"response", "cmrr", "polarity", "latency"}},
        {"band_hz", {"response", "noise", "hum", "cmrr"}},
        {"mains_hz", {"hum"}},
        {"stimulus", {"cmrr"}},
    };
    return all;
}

void require_meaningful_keys(const TableReader& table, const PlanStep& step) {
    for (const auto& [key, kinds] : special_keys()) {
        const std::string name(key);
        if (table.has(key) && std::find(kinds.begin(), kinds.end(), step.measure) == kinds.end())
            table.fail(key, fmt::format("'{}' in a step that measures {}", name, step.measure),
                       fmt::format("it only where {} is measured", listed(kinds)));
    }
    if (step.measure != "cmrr") return;
    const bool sweep = step.stimulus == "sweep";
    for (const char* key : {"from_hz", "to_hz"})
        if (!sweep && table.has(key))
            table.fail(key, "a sweep's end in a step that plays tones", "stimulus = \"sweep\" with it");
    if (sweep && table.has("frequencies_hz"))
        table.fail("frequencies_hz", "frequencies in a step that plays a sweep",
                   "stimulus = \"tones\" with them");
}

void read_sweep_ends(TableReader& table, PlanStep& step) {
    step.from_hz = table.number("from_hz", audible_and_beyond_hz);
    step.to_hz = table.number("to_hz", audible_and_beyond_hz);
    const double from_hz = step.from_hz.value_or(sweep_default_low_hz);
    if (step.to_hz && from_hz >= *step.to_hz)
        table.fail("to_hz", fmt::format("{:g}", *step.to_hz),
                   fmt::format("a frequency above from_hz, which is {:g}", from_hz));
}

void read_tones(TableReader& table, PlanStep& step) {
    step.frequencies_hz = table.numbers("frequencies_hz", audible_and_beyond_hz);
    if (table.has("frequencies_hz") && step.frequencies_hz.empty())
        table.fail("frequencies_hz", "an empty list", "a frequency or a list of them");
    auto sorted = step.frequencies_hz;
    std::sort(sorted.begin(), sorted.end());
    const auto twice = std::adjacent_find(sorted.begin(), sorted.end());
    if (twice != sorted.end())
        table.fail("frequencies_hz", fmt::format("{:g} twice", *twice), "each frequency once");
}

void read_band(TableReader& table, PlanStep& step) {
    const auto band = table.numbers("band_hz", {0.0, audible_and_beyond_hz.high});
    if (!table.has("band_hz")) return;
    if (band.size() != 2 || band[0] >= band[1])
        table.fail("band_hz",
                   band.size() == 2 ? fmt::format("[{:g}, {:g}]", band[0], band[1])
                                    : fmt::format("{} number{}", band.size(), band.size() == 1 ? "" : "s"),
                   "two frequencies, low and high, such as [20, 20000]");
    step.band = {band[0], band[1]};
}

}  // namespace

std::string read_setting_name(TableReader& table, const DeviceProfile& profile, bool may_be_all) {
    std::vector<std::string_view> names;
    for (const auto& setting : profile.settings) names.push_back(setting.name);
    const auto name = table.text("setting");
    if (!name && may_be_all) return "";
    if (!name && names.size() == 1) return std::string(names.front());
    std::string quoted;
    for (auto one : names) quoted += (quoted.empty() ? "'" : ", '") + shown(one) + "'";
    const std::string expected = names.size() == 1 && names.front().empty()
                                     ? "no setting, for no [[setting]] is declared"
                                     : "a declared [[setting]]: " + quoted;
    if (!name) table.fail_missing("setting", expected);
    if (profile.find_setting(*name) == nullptr)
        table.fail("setting", "'" + shown(*name) + "'", expected, did_you_mean(*name, names));
    return *name;
}

PlanStep read_plan_step(TableReader& table, const DeviceProfile& profile) {
    PlanStep step;
    step.line = table.line();
    step.measure = table.need_choice("measure", measure_kinds());
    step.setting = read_setting_name(table, profile, false);
    step.drive_dbu = table.number("drive_dbu", levels_dbu);
    step.common_mode_drive_dbu = table.number("common_mode_drive_dbu", levels_dbu);
    read_tones(table, step);
    read_sweep_ends(table, step);
    step.length_s = table.number("length_s", lengths_s);
    read_band(table, step);
    step.mains_hz = table.number("mains_hz", {10.0, 500.0});
    step.stimulus = table.choice("stimulus", {"tones", "sweep"}).value_or("tones");
    require_meaningful_keys(table, step);
    return step;
}

std::vector<double> figure_frequencies_hz(const PlanStep& step) {
    if (step.measure == "gain" || step.measure == "distortion")
        return step.frequencies_hz.empty() ? std::vector<double>{997.0} : step.frequencies_hz;
    if (step.measure != "cmrr") return {};
    if (step.stimulus == "tones")
        return step.frequencies_hz.empty() ? std::vector<double>{85.0, 997.0, 9973.0} : step.frequencies_hz;
    // A sweep's figures are given at round frequencies within sweep and band.
    std::vector<double> round;
    for (double hz : {100.0, 1000.0, 10000.0})
        if (hz >= std::max(step.from_hz.value_or(sweep_default_low_hz), step.band.low_hz) &&
            hz <= std::min(step.to_hz.value_or(hz), step.band.high_hz))
            round.push_back(hz);
    return round;
}

}  // namespace coldpin::profile
