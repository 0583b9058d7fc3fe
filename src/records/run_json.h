// A run as "coldpin-run/1" and back, without its samples.
#pragma once

#include <string>

#include <nlohmann/json_fwd.hpp>

#include "coldpin/check/run.h"

namespace coldpin::records {

nlohmann::ordered_json to_json(const check::Run& run);
// Everything but the recordings' samples and descriptions; captures carry their names. Throws UsageError.
check::Run run_from_json(const std::string& text, const std::string& source);

}  // namespace coldpin::records
