// The calibrations of a rig as a table, and how they drift.
#pragma once

#include <string>
#include <vector>

#include "coldpin/rig/setup.h"

namespace coldpin::report {

// Oldest first, one line each; below, what changed since the one before beyond both uncertainties, in words.
std::string calibrations_text(const std::vector<rig::Calibration>& calibrations);

}  // namespace coldpin::report
