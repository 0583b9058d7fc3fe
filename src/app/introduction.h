// What a person must know and do before the first note is played.
#pragma once

#include "coldpin/check/perform.h"

#include "terminal_bench.h"

namespace coldpin::app {

// Cautions, then the first wiring; nothing for rigs that have no hands. With `yes` nothing is asked, and a
// plan that needs a hand later is refused (UsageError) here, before anything is played.
void introduce(const profile::DeviceProfile& device, const rig::Session& session,
               const check::CapturePlan& plan, TerminalBench& bench, bool yes);

}  // namespace coldpin::app
