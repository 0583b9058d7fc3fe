// The audio devices this machine offers (PortAudio).
#pragma once

#include <string>
#include <vector>

namespace coldpin::rig {

struct AudioDevice {
    std::string name;
    std::string host_api;
    int input_channels = 0;
    int output_channels = 0;
    double default_rate_hz = 0.0;
    std::vector<double> common_rates_hz;  // of 44.1, 48, 88.2, 96, 192 kHz those it accepts in full duplex
    bool can_serve = false;               // plays and records at once, at least 1 out and 1 in
    std::string verdict;                  // one sentence: what it can serve for, or why not
};

// Throws CannotMeasure when the audio system cannot be started. Quiet: the audio libraries' own chatter on
// stderr is suppressed.
std::vector<AudioDevice> list_devices();

}  // namespace coldpin::rig
