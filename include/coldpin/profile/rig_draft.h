// A new rig file for an interface that was just chosen.
#pragma once

#include <optional>
#include <string>

namespace coldpin::profile {

struct RigChoice {
    std::string name;
    std::string device;
    std::string host_api;
    double sample_rate_hz = 48000.0;
    int differential_output = 1;
    std::optional<int> common_mode_output;
    int device_input = 1;
    std::optional<int> reference_input;
};

// A whole, commented rig file without a calibration. Its fixture is the shipped 40 dB injection head (or,
// without a common-mode output, a split pad and a separate feed of those values), its limits cautious; both
// are to be looked at.
std::string rig_text_for(const RigChoice& choice);

}  // namespace coldpin::profile
