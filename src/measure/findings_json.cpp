#include "coldpin/measure/findings_json.h"

#include <cmath>
#include <stdexcept>

#include <fmt/core.h>
#include <nlohmann/json.hpp>

#include "coldpin/units/error.h"

namespace coldpin::measure {

namespace {

using Json = nlohmann::ordered_json;
constexpr const char* schema = "coldpin-findings/1";

double finite(double value, const std::string& where) {
    if (!std::isfinite(value)) throw std::logic_error(fmt::format("{} is not a finite number", where));
    return value;
}

const std::vector<double>& finite(const std::vector<double>& values, const std::string& where) {
    for (double value : values) finite(value, where);
    return values;
}

Json to_json(const Conditions& conditions) {
    Json json = Json::object();
    for (const auto& [name, value] : conditions.entries()) {
        if (const auto* number = std::get_if<double>(&value)) finite(*number, name);
        if (const auto* numbers = std::get_if<std::vector<double>>(&value)) finite(*numbers, name);
        std::visit([&, &key = name](const auto& plain) { json[key] = plain; }, value);
    }
    return json;
}

Json to_json(const Curve& curve) {
    Json json;
    json["quantity"] = curve.quantity;
    json["x_unit"] = curve.x_unit;
    json["y_unit"] = curve.y_unit;
    json["x"] = finite(curve.x, curve.quantity);
    json["y"] = finite(curve.y, curve.quantity);
    json["uncertainty"] = finite(curve.uncertainty, curve.quantity);
    json["conditions"] = to_json(curve.conditions);
    return json;
}

Conditions conditions_from_json(const Json& json) {
    Conditions conditions;
    json.get_ref<const Json::object_t&>();  // items() of anything else would pass as one without a name
    for (const auto& [name, value] : json.items()) {
        if (value.is_string())
            conditions.set(name, value.get<std::string>());
        else if (value.is_boolean())
            conditions.set(name, value.get<bool>());
        else if (value.is_number())
            conditions.set(name, value.get<double>());
        else
            conditions.set(name, value.get<std::vector<double>>());
    }
    return conditions;
}

Bound bound_from_name(const std::string& name, const std::string& source) {
    for (Bound bound : {Bound::exact, Bound::at_least, Bound::at_most})
        if (name == bound_name(bound)) return bound;
    throw UsageError(
        fmt::format("{}: bound '{}' is unknown; expected exact, at_least or at_most", source, name));
}

// A library's message names no file; ours does.
template <typename Read>
auto reading(const std::string& source, Read&& read) {
    try {
        return read();
    } catch (const Json::exception& error) {
        throw UsageError(fmt::format("{}: findings are damaged: {}", source, error.what()));
    }
}

}  // namespace

Json to_json(const Figure& figure) {
    Json json;
    json["quantity"] = figure.quantity;
    json["value"] = finite(figure.value, figure.quantity);
    json["unit"] = figure.unit;
    json["uncertainty"] = finite(figure.uncertainty, figure.quantity);
    json["coverage_factor"] = finite(figure.coverage_factor, figure.quantity);
    json["bound"] = bound_name(figure.bound);
    json["conditions"] = to_json(figure.conditions);
    return json;
}

Json to_json(const Findings& findings) {
    Json json;
    json["schema"] = schema;
    json["kind"] = findings.kind;
    json["figures"] = Json::array();
    for (const Figure& figure : findings.figures) json["figures"].push_back(to_json(figure));
    json["curves"] = Json::array();
    for (const Curve& curve : findings.curves) json["curves"].push_back(to_json(curve));
    json["cautions"] = findings.cautions;
    return json;
}

Figure figure_from_json(const Json& json, const std::string& source) {
    return reading(source, [&] {
        Figure figure;
        figure.quantity = json.at("quantity").get<std::string>();
        figure.value = json.at("value").get<double>();
        figure.unit = json.at("unit").get<std::string>();
        figure.uncertainty = json.at("uncertainty").get<double>();
        figure.coverage_factor = json.at("coverage_factor").get<double>();
        figure.bound = bound_from_name(json.at("bound").get<std::string>(), source);
        figure.conditions = conditions_from_json(json.at("conditions"));
        return figure;
    });
}

Findings findings_from_json(const Json& json, const std::string& source) {
    return reading(source, [&] {
        if (json.at("schema").get<std::string>() != schema)
            throw UsageError(fmt::format("{}: schema '{}'; expected '{}'", source,
                                         json.at("schema").get<std::string>(), schema));
        Findings findings;
        findings.kind = json.at("kind").get<std::string>();
        for (const auto& one : json.at("figures")) findings.figures.push_back(figure_from_json(one, source));
        for (const auto& one : json.at("curves")) {
            Curve curve;
            curve.quantity = one.at("quantity").get<std::string>();
            curve.x_unit = one.at("x_unit").get<std::string>();
            curve.y_unit = one.at("y_unit").get<std::string>();
            curve.x = one.at("x").get<std::vector<double>>();
            curve.y = one.at("y").get<std::vector<double>>();
            curve.uncertainty = one.at("uncertainty").get<std::vector<double>>();
            curve.conditions = conditions_from_json(one.at("conditions"));
            findings.curves.push_back(std::move(curve));
        }
        findings.cautions = json.at("cautions").get<std::vector<std::string>>();
        return findings;
    });
}

}  // namespace coldpin::measure
