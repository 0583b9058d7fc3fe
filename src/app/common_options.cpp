#include "common_options.h"

#include "coldpin/rig/backend.h"

#include "terminal.h"

namespace coldpin::app {

void add_rig_options(CLI::App& command, RigOptions& options) {
    command
        .add_option("--rig", options.rig,
                    "rig file, or the word simulated: a complete simulated rig, no hardware")
        ->required()
        ->type_name("FILE");
    command.add_flag("--real-time", options.real_time, "let the simulated rig take as long as a real one");
    command.add_option("--seed", options.seed, "another chance for the simulated rig's noise")
        ->type_name("N");
}

profile::RigFile read_rig(const RigOptions& options, const profile::DeviceProfile* device) {
    profile::RigFile rig = profile::read_rig(options.rig);
    auto& simulated = rig.setup.simulated;
    if (device != nullptr && device->simulated && !simulated.preamp) simulated.preamp = device->simulated;
    if (options.seed) simulated.seed = *options.seed;
    simulated.real_time = simulated.real_time || options.real_time;
    return rig;
}

rig::Session open_session(const profile::RigFile& rig) {
    return {rig.setup, rig::open_backend(rig.setup), stop_flag()};
}

}  // namespace coldpin::app
