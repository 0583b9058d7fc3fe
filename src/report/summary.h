// What sheet and HTML say alike about a whole run.
#pragma once

#include <string>
#include <vector>

#include "coldpin/check/run.h"

namespace coldpin::report {

// One plain sentence: "Meets all 16 requirements."
std::string headline(const check::Run& run);
// "channel left, gain setting 40 dB"; empty for a unit with one of each.
std::string group_name(const std::string& unit_channel, const std::string& setting);
// The run's own, its steps' refusals and cautions, each once.
std::vector<std::string> all_cautions(const check::Run& run);

}  // namespace coldpin::report
