// The back ends, one maker each.
#pragma once

#include <memory>

#include "coldpin/rig/backend.h"

namespace coldpin::rig {

std::unique_ptr<Backend> make_simulated_backend(const Setup& setup);
std::unique_ptr<Backend> make_stored_backend(const Setup& setup);
std::unique_ptr<Backend> make_portaudio_backend(const Setup& setup);

}  // namespace coldpin::rig
