// Options that several commands share.
#pragma once

#include <memory>
#include <optional>
#include <string>

#include <CLI/CLI.hpp>

#include "coldpin/check/perform.h"
#include "coldpin/profile/rig_file.h"
#include "coldpin/rig/session.h"

namespace coldpin::app {

struct RigOptions {
    std::string rig;
    bool real_time = false;
    std::optional<unsigned long> seed;
};
void add_rig_options(CLI::App& command, RigOptions& options);

// Reads the rig, with the profile's pretended unit where the rig is simulated and names none of its own.
profile::RigFile read_rig(const RigOptions& options, const profile::DeviceProfile* device);

// Opens its back end.
rig::Session open_session(const profile::RigFile& rig);

}  // namespace coldpin::app
