// Findings as JSON ("coldpin-findings/1") and back. Numbers keep all their bits; a number that is not finite
// is a programming error and throws std::logic_error rather than reaching a file.
#pragma once

#include <string>

#include <nlohmann/json_fwd.hpp>

#include "coldpin/measure/figure.h"

namespace coldpin::measure {

nlohmann::ordered_json to_json(const Findings& findings);
nlohmann::ordered_json to_json(const Figure& figure);
// Throws UsageError naming `source` when members are missing or of the wrong type.
Findings findings_from_json(const nlohmann::ordered_json& json, const std::string& source);
Figure figure_from_json(const nlohmann::ordered_json& json, const std::string& source);

}  // namespace coldpin::measure
