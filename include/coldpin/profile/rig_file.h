// Rig files: TOML, schema "coldpin-rig/1".
#pragma once

#include <filesystem>
#include <string>

#include "coldpin/rig/setup.h"

namespace coldpin::profile {

struct RigFile {
    rig::Setup setup;
    std::string source_text;
    std::string source_name;
};

// `name` is a file, or the word "simulated" for the built-in simulated rig (the same text as
// profiles/rigs/simulated.toml, compiled in). Errors as read_device_profile(). A file for a real interface
// (backend portaudio) must name its device, limits.max_preamp_input_dbu, and every uncertainty that goes with
// a level: left out, they would count as no ceiling and no doubt.
//
// Both may be called from any thread.
RigFile read_rig(const std::string& name);
RigFile rig_from_text(const std::string& text, const std::string& source_name);

}  // namespace coldpin::profile
