// One [[requirement]] of a device profile.
#pragma once

#include "coldpin/profile/device_profile.h"

#include "toml_reader.h"

namespace coldpin::profile {

// Needs the profile's settings and plan, to refuse what no step would measure.
Requirement read_requirement(TableReader& table, const DeviceProfile& profile);

}  // namespace coldpin::profile
