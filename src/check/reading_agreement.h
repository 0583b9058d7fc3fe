// Does a meter's reading agree with the loop and with the calibration before?
#pragma once

#include <optional>

#include "coldpin/rig/setup.h"

namespace coldpin::check {

// Throws UsageError that names what is likely (a peak value, one leg instead of two) when the reading cannot
// be right.
void require_agreement(const rig::Calibration& now, const std::optional<rig::Calibration>& before,
                       double volts_rms);

}  // namespace coldpin::check
