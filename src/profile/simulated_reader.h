// The pretended interface, unit and faults, as both device profiles and rig files describe them.
#pragma once

#include "coldpin/rig/setup.h"

#include "toml_reader.h"

namespace coldpin::profile {

rig::SimulatedPreamp read_simulated_preamp(TableReader& table);
rig::SimulatedInterface read_simulated_interface(TableReader& table);
rig::SimulatedFaults read_simulated_faults(TableReader& table);

}  // namespace coldpin::profile
