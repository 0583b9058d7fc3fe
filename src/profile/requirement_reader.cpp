#include "requirement_reader.h"

#include <algorithm>
#include <cmath>
#include <map>
#include <set>

#include <fmt/format.h>

#include "coldpin/profile/quantities.h"

#include "plan_reader.h"

namespace coldpin::profile {

namespace {

constexpr int most_harmonics = 1000;

const Quantity& read_quantity(TableReader& table) {
    const std::string name = table.need_text("quantity");
    if (const Quantity* quantity = find_quantity(name)) return *quantity;
    std::vector<std::string_view> names;
    for (const auto& one : quantities()) names.push_back(one.name);
    const std::string hint = did_you_mean(name, names);
    table.fail("quantity", "'" + shown(name) + "'",
               hint.empty() ? "one of " + listed(names) : "the name of a quantity", hint);
}

void refuse_other_conditions(const TableReader& table, const Quantity& quantity) {
    std::set<std::string_view> all;
    for (const auto& one : quantities()) all.insert(one.conditions.begin(), one.conditions.end());
    for (std::string_view key : all) {
        const auto& own = quantity.conditions;
        if (!table.has(key) || std::find(own.begin(), own.end(), key) != own.end()) continue;
        table.fail(key, fmt::format("a condition that '{}' does not have", quantity.name),
                   own.empty() ? "no condition" : listed(own));
    }
}

void read_conditions(TableReader& table, const Quantity& quantity, Requirement& requirement) {
    for (std::string_view condition : quantity.conditions) {
        const std::string name(condition);
        if (condition == "weighting") {
            requirement.conditions.set(name,
                                       table.choice(condition, {"none", "A", "C", "468"}).value_or("none"));
        } else if (condition == "detector") {
            requirement.conditions.set(name, table.choice(condition, {"rms", "quasi-peak"}).value_or("rms"));
        } else if (condition == "harmonic") {
            const auto number = table.whole(condition, 1, most_harmonics);
            if (!number)
                table.fail_missing(condition, "the number of the mains harmonic, 1 for the fundamental");
            requirement.conditions.set(name, static_cast<double>(*number));
        } else if (const auto value = table.number(condition, audible_and_beyond_hz)) {
            requirement.conditions.set(name, *value);
        }
    }
}

void require_order(const TableReader& table, std::optional<double> min, std::optional<double> max) {
    if (min && max && *min > *max)
        table.fail("min", fmt::format("{:g}", *min), fmt::format("no more than max, which is {:g}", *max));
}

void read_mask(TableReader& table, Requirement& requirement) {
    table.tables("mask", [&](TableReader& point) {
        MaskPoint mask;
        mask.frequency_hz = point.need_number("frequency_hz", audible_and_beyond_hz);
        mask.min = point.number("min");
        mask.max = point.number("max");
        point.finish();  // a misspelt limit is better named than missed
        if (!mask.min && !mask.max) point.fail("", "neither min nor max", "a limit at this frequency");
        require_order(point, mask.min, mask.max);
        if (!requirement.mask.empty() && mask.frequency_hz <= requirement.mask.back().frequency_hz)
            point.fail(
                "frequency_hz", fmt::format("{:g}", mask.frequency_hz),
                fmt::format("more than {:g}, the frequency before", requirement.mask.back().frequency_hz));
        requirement.mask.push_back(mask);
    });
    // Between the points lie straight lines: a single one spans nothing.
    for (const auto limit : {&MaskPoint::min, &MaskPoint::max}) {
        const auto points = std::count_if(requirement.mask.begin(), requirement.mask.end(),
                                          [&](const MaskPoint& one) { return (one.*limit).has_value(); });
        if (points == 1)
            table.fail("mask", limit == &MaskPoint::min ? "a single min" : "a single max",
                       "at least two, for the limit runs from point to point");
    }
}

void read_limits(TableReader& table, const Quantity& quantity, Requirement& requirement) {
    requirement.min = table.number("min");
    requirement.max = table.number("max");
    requirement.unit = table.choice("unit", quantity.units).value_or(std::string(quantity.units.front()));
    requirement.why = table.text("why").value_or("");
    require_order(table, requirement.min, requirement.max);
    read_mask(table, requirement);
    table.finish();  // a misspelt limit is better named than missed
    if (quantity.is_curve) {
        for (const char* key : {"min", "max"})
            if (table.has(key))
                table.fail(key, fmt::format("one limit for the curve '{}'", quantity.name), "a mask");
        if (requirement.mask.empty())
            table.fail_missing("mask", "a list such as [{ frequency_hz = 20, min = -1.0, max = 0.5 }, ...]");
        return;
    }
    if (!requirement.mask.empty())
        table.fail("mask", fmt::format("a mask for the single figure '{}'", quantity.name), "min or max");
    if (!requirement.min && !requirement.max) table.fail("", "neither min nor max", "a limit");
}

// The steps that give the quantity at the requirement's setting; at least one.
std::vector<const PlanStep*> measuring_steps(const TableReader& table, const Quantity& quantity,
                                             const Requirement& requirement, const DeviceProfile& profile) {
    std::vector<const PlanStep*> steps;
    for (const PlanStep& step : profile.plan)
        if (step.measure == quantity.measure &&
            (requirement.setting.empty() || step.setting == requirement.setting))
            steps.push_back(&step);
    if (steps.empty())
        table.fail(
            "quantity", fmt::format("'{}', which no step measures", quantity.name),
            fmt::format(
                "a [[plan]] step with measure = \"{}\"{}", quantity.measure,
                requirement.setting.empty() ? "" : " and setting = \"" + shown(requirement.setting) + "\""));
    return steps;
}

// As judging compares frequencies.
bool offers(const std::vector<double>& frequencies_hz, double wanted_hz) {
    return std::any_of(frequencies_hz.begin(), frequencies_hz.end(),
                       [&](double hz) { return std::abs(hz - wanted_hz) <= 1e-6 * wanted_hz; });
}

// A frequency that no step gives would never be judged; none at all would judge the first of several tones
// and keep quiet about the others.
void require_measured_frequency(const TableReader& table, const Requirement& requirement,
                                const std::vector<const PlanStep*>& steps) {
    std::map<std::string, std::vector<double>> given_by_setting;
    for (const PlanStep* step : steps)
        for (double hz : figure_frequencies_hz(*step)) {
            auto& given = given_by_setting[step->setting];
            if (!offers(given, hz)) given.push_back(hz);
        }
    const auto* asked = requirement.conditions.find("frequency_hz");
    for (const PlanStep* step : steps) {
        const auto& given = given_by_setting[step->setting];
        const std::string expected =
            given.empty() ? "a step that gives figures"
                          : fmt::format("one that the plan measures: {:g} Hz", fmt::join(given, ", "));
        if (asked == nullptr && given.size() > 1) table.fail_missing("frequency_hz", expected);
        if (asked != nullptr && !offers(given, std::get<double>(*asked)))
            table.fail("frequency_hz", fmt::format("{:g}", std::get<double>(*asked)), expected);
    }
}

// Outside its step's sweep a mask would be silently passed over.
void require_mask_within_sweep(const TableReader& table, const Requirement& requirement,
                               const std::vector<const PlanStep*>& steps) {
    if (requirement.mask.empty()) return;
    for (const PlanStep* step : steps) {
        if (step->measure != "response") continue;
        const double from_hz = step->from_hz.value_or(10.0);
        if (requirement.mask.front().frequency_hz < from_hz)
            table.fail("mask", fmt::format("a point at {:g} Hz", requirement.mask.front().frequency_hz),
                       fmt::format("{:g} Hz or more, where the sweep begins", from_hz));
        if (step->to_hz && requirement.mask.back().frequency_hz > *step->to_hz)
            table.fail("mask", fmt::format("a point at {:g} Hz", requirement.mask.back().frequency_hz),
                       fmt::format("{:g} Hz or less, where the sweep ends", *step->to_hz));
    }
}

}  // namespace

Requirement read_requirement(TableReader& table, const DeviceProfile& profile) {
    Requirement requirement;
    requirement.line = table.line();
    const Quantity& quantity = read_quantity(table);
    requirement.quantity = quantity.name;
    requirement.setting = read_setting_name(table, profile, true);
    refuse_other_conditions(table, quantity);
    read_conditions(table, quantity, requirement);
    read_limits(table, quantity, requirement);
    const auto steps = measuring_steps(table, quantity, requirement, profile);
    if (std::find(quantity.conditions.begin(), quantity.conditions.end(), "frequency_hz") !=
        quantity.conditions.end())
        require_measured_frequency(table, requirement, steps);
    require_mask_within_sweep(table, requirement, steps);
    return requirement;
}

}  // namespace coldpin::profile
