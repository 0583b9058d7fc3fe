// What a measurement gives: figures, curves and cautions.
#pragma once

#include <initializer_list>
#include <string>
#include <string_view>
#include <utility>
#include <variant>
#include <vector>

namespace coldpin::measure {

// The figure is the value itself, or only a bound because noise or the fixture limits what can be claimed.
enum class Bound { exact, at_least, at_most };

// Under which conditions a figure or curve holds, in a fixed order: name -> text, number, flag or numbers.
// Names carry units (frequency_hz, band_hz).
using ConditionValue = std::variant<std::string, double, bool, std::vector<double>>;

class Conditions {
  public:
    Conditions() = default;
    Conditions(std::initializer_list<std::pair<std::string, ConditionValue>> entries) : entries_(entries) {}
    void set(const std::string& name, ConditionValue value);  // replaces or appends
    const ConditionValue* find(const std::string& name) const;
    const std::vector<std::pair<std::string, ConditionValue>>& entries() const { return entries_; }
    bool operator==(const Conditions&) const = default;

  private:
    std::vector<std::pair<std::string, ConditionValue>> entries_;
};

// One number. `uncertainty` is expanded with `coverage_factor` in the figure's own unit and is never
// negative. Value and uncertainty are finite, always: what does not exist is left out with a caution.
struct Figure {
    std::string quantity;
    double value = 0.0;
    std::string unit;
    double uncertainty = 0.0;
    double coverage_factor = 2.0;
    Bound bound = Bound::exact;
    Conditions conditions;
    bool operator==(const Figure&) const = default;
};

// Many numbers over one axis; `uncertainty` is empty or as long as y.
struct Curve {
    std::string quantity;
    std::string x_unit;
    std::string y_unit;
    std::vector<double> x;
    std::vector<double> y;
    std::vector<double> uncertainty;
    Conditions conditions;
    bool operator==(const Curve&) const = default;
};

struct Findings {
    std::string kind;  // "gain", "noise" ...
    std::vector<Figure> figures;
    std::vector<Curve> curves;
    std::vector<std::string> cautions;  // plain sentences
    bool operator==(const Findings&) const = default;

    // First figure of the quantity whose conditions contain all those given; nullptr when there is none.
    const Figure* figure(const std::string& quantity, const Conditions& having = {}) const;
    const Curve* curve(const std::string& quantity) const;
};

std::string_view bound_name(Bound bound);  // "exact", "at_least", "at_most"

}  // namespace coldpin::measure
