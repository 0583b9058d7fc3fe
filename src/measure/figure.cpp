#include "coldpin/measure/figure.h"

#include <algorithm>

namespace coldpin::measure {

void Conditions::set(const std::string& name, ConditionValue value) {
    const auto found = std::find_if(entries_.begin(), entries_.end(),
                                    [&](const auto& entry) { return entry.first == name; });
    if (found != entries_.end())
        found->second = std::move(value);
    else
        entries_.emplace_back(name, std::move(value));
}

const ConditionValue* Conditions::find(const std::string& name) const {
    const auto found = std::find_if(entries_.begin(), entries_.end(),
                                    [&](const auto& entry) { return entry.first == name; });
    return found != entries_.end() ? &found->second : nullptr;
}

const Figure* Findings::figure(const std::string& quantity, const Conditions& having) const {
    const auto found = std::find_if(figures.begin(), figures.end(), [&](const Figure& one) {
        return one.quantity == quantity &&
               std::all_of(having.entries().begin(), having.entries().end(), [&](const auto& entry) {
                   const ConditionValue* value = one.conditions.find(entry.first);
                   return value != nullptr && *value == entry.second;
               });
    });
    return found != figures.end() ? &*found : nullptr;
}

const Curve* Findings::curve(const std::string& quantity) const {
    const auto found = std::find_if(curves.begin(), curves.end(),
                                    [&](const Curve& one) { return one.quantity == quantity; });
    return found != curves.end() ? &*found : nullptr;
}

std::string_view bound_name(Bound bound) {
    switch (bound) {
        case Bound::exact:
            return "exact";
        case Bound::at_least:
            return "at_least";
        case Bound::at_most:
            break;
    }
    return "at_most";
}

}  // namespace coldpin::measure
