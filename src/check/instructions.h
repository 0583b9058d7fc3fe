// What a hand must do at the bench, in words that say which plug goes where.
#pragma once

#include <string>
#include <vector>

#include "coldpin/profile/device_profile.h"
#include "coldpin/rig/session.h"

namespace coldpin::check {

// From one wiring to the next; a sentence for each thing to move. Empty when nothing changes.
std::vector<std::string> instructions(const rig::Wiring& from, const rig::Wiring& to,
                                      const rig::Setup& setup);

}  // namespace coldpin::check
