// One [[plan]] step of a device profile.
#pragma once

#include <string>
#include <vector>

#include "coldpin/profile/device_profile.h"

#include "toml_reader.h"

namespace coldpin::profile {

inline constexpr Range audible_and_beyond_hz = {0.1, 96000.0};

PlanStep read_plan_step(TableReader& table, const DeviceProfile& profile);

// The setting a table names: one that is declared. Without the key: the only one there is, or, for a
// requirement (`may_be_all`), the empty name that stands for all.
std::string read_setting_name(TableReader& table, const DeviceProfile& profile, bool may_be_all);

// Frequencies at which the step gives its figures; empty for steps whose figures have none.
std::vector<double> figure_frequencies_hz(const PlanStep& step);

}  // namespace coldpin::profile
