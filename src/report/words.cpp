#include "coldpin/report/words.h"

#include <algorithm>
#include <cmath>
#include <string_view>

#include <fmt/core.h>

#include "coldpin/profile/quantities.h"

namespace coldpin::report {

namespace {

// Digits after the point so that two digits of the uncertainty show: what lies below is chance.
int decimals_for(double uncertainty) {
    if (!(uncertainty > 0.0)) return 2;
    const int digits = 1 - static_cast<int>(std::floor(std::log10(uncertainty)));
    return std::clamp(digits, 0, 4);
}

std::string number_text(double value, int decimals) {
    std::string text = fmt::format("{:.{}f}", value, decimals);
    if (text.find_first_not_of("-0.") == std::string::npos && text.front() == '-')
        text.erase(0, 1);  // no "-0.00"
    return text;
}

std::string with_unit(const std::string& number, const std::string& unit) {
    return unit.empty() ? number : number + " " + unit;
}

// "9.53 Hz", "12.4 kHz", "391.37 frames"; the same decimals for value and uncertainty.
struct Scaled {
    double factor = 1.0;
    std::string unit;
    int decimals = 2;
};

Scaled scale_for(const measure::Figure& figure) {
    Scaled scaled{1.0, figure.unit, decimals_for(figure.uncertainty)};
    const double size = std::abs(figure.value);
    if (figure.unit == "Hz" && figure.quantity != "mains_frequency" && size >= 10000.0)
        scaled = {1e-3, "kHz", 0};
    if (figure.unit == "s") scaled = size < 1e-3 ? Scaled{1e6, "µs", 0} : Scaled{1e3, "ms", 0};
    scaled.decimals = decimals_for(figure.uncertainty * scaled.factor);
    // A ratio far below a thousandth of a per cent is not nothing: "0.0000 %" would say so.
    if (figure.unit == "%" && size > 0.0 && size < 0.001) {
        scaled = {1e4, "ppm", 0};
        const double shown = figure.uncertainty > 0.0 ? figure.uncertainty : 0.1 * size;
        scaled.decimals =
            std::clamp(1 - static_cast<int>(std::floor(std::log10(shown * scaled.factor))), 0, 6);
        return scaled;
    }
    if (figure.bound != measure::Bound::exact && figure.unit == "%" && size > 0.0) {
        scaled.decimals = std::clamp(1 - static_cast<int>(std::floor(std::log10(size))), 0, 4);
        return scaled;
    }
    if (figure.unit == "dB" || figure.unit.rfind("dB", 0) == 0)
        scaled.decimals = std::clamp(scaled.decimals, 1, 3);
    return scaled;
}

std::string limit_number(double value) {
    std::string text = fmt::format("{:.4f}", value);
    while (text.back() == '0') text.pop_back();
    if (text.back() == '.') text.pop_back();
    return text == "-0" ? "0" : text;
}

double number_or(const measure::ConditionValue* value, double otherwise) {
    if (value == nullptr) return otherwise;
    const double* number = std::get_if<double>(value);
    return number != nullptr ? *number : otherwise;
}

}  // namespace

std::string frequency_text(double frequency_hz) {
    if (frequency_hz >= 1000.0) {
        const double khz = frequency_hz / 1000.0;
        return fmt::format("{} kHz", limit_number(std::round(khz * 1000.0) / 1000.0));
    }
    return fmt::format("{} Hz", limit_number(std::round(frequency_hz * 100.0) / 100.0));
}

std::string value_text(const measure::Figure& figure) {
    if (figure.quantity == "polarity") return figure.value > 0.0 ? "upright (+1)" : "inverted (-1)";
    const Scaled scaled = scale_for(figure);
    std::string text = with_unit(number_text(figure.value * scaled.factor, scaled.decimals), scaled.unit);
    switch (figure.bound) {
        case measure::Bound::at_least:
            return "≥ " + text;
        case measure::Bound::at_most:
            return "≤ " + text;
        case measure::Bound::exact:
            break;
    }
    return text;
}

std::string uncertainty_text(const measure::Figure& figure) {
    if (figure.quantity == "polarity" || figure.bound != measure::Bound::exact || figure.uncertainty <= 0.0)
        return "";
    const Scaled scaled = scale_for(figure);
    return "± " + number_text(figure.uncertainty * scaled.factor, scaled.decimals);
}

std::string margin_text(double margin) {
    const double size = std::abs(margin);
    return fmt::format("{:+.{}f}", margin, size >= 100.0 ? 0 : (size >= 10.0 ? 1 : 2));
}

std::string limit_text(const profile::Requirement& requirement) {
    const std::string& unit = requirement.unit;
    if (!requirement.mask.empty()) return "mask";
    if (requirement.quantity == "polarity" && requirement.min && *requirement.min > 0.0) return "upright";
    if (requirement.quantity == "polarity" && requirement.max && *requirement.max < 0.0) return "inverted";
    if (unit == "Hz" && requirement.min && !requirement.max)
        return "at least " + frequency_text(*requirement.min);
    if (unit == "Hz" && requirement.max && !requirement.min)
        return "at most " + frequency_text(*requirement.max);
    if (requirement.min && requirement.max)
        return with_unit(limit_number(*requirement.min) + " to " + limit_number(*requirement.max), unit);
    if (requirement.min) return with_unit("at least " + limit_number(*requirement.min), unit);
    if (requirement.max) return with_unit("at most " + limit_number(*requirement.max), unit);
    return "";
}

std::string quantity_text(const std::string& quantity, const measure::Conditions& conditions) {
    const profile::Quantity* known = profile::find_quantity(quantity);
    std::string text = known != nullptr ? std::string(known->words) : quantity;
    std::replace(text.begin(), text.end(), '_', ' ');
    // Which of several alike: the wiring of a hum search, the place that adds, measured against computed.
    for (const char* name : {"step", "place"})
        if (const auto* value = conditions.find(name))
            if (const auto* word = std::get_if<std::string>(value)) {
                text += (std::string_view(name) == "step" ? ", up to " : ", ") + *word;
                std::replace(text.begin(), text.end(), '_', ' ');
            }
    if (const auto* measured = conditions.find("measured"))
        if (const bool* is = std::get_if<bool>(measured); is != nullptr && *is) text += ", measured";
    if (const double rejection = number_or(conditions.find("unit_rejection_db"), 0.0); rejection > 0.0)
        text += fmt::format(" on a unit of {:g} dB rejection", rejection);
    if (const auto* weighting = conditions.find("weighting")) {
        const std::string* name = std::get_if<std::string>(weighting);
        if (name != nullptr && *name == "none") text += ", unweighted";
        if (name != nullptr && *name != "none") text += ", " + *name + "-weighted";
        const auto* detector = conditions.find("detector");
        const auto* how = detector != nullptr ? std::get_if<std::string>(detector) : nullptr;
        if (how != nullptr && *how == "quasi-peak") text += " quasi-peak";
    }
    const double harmonic = number_or(conditions.find("harmonic"), 0.0);
    if (harmonic > 0.0) text += fmt::format(" {:g}", harmonic);
    const double frequency_hz = number_or(conditions.find("frequency_hz"), 0.0);
    if (frequency_hz > 0.0) text += " at " + frequency_text(frequency_hz);
    return text;
}

}  // namespace coldpin::report
