// Is a recording whole? Content decides: drivers miss real losses and report harmless ones.
#pragma once

#include <cstddef>
#include <optional>
#include <span>
#include <string>
#include <vector>

#include "coldpin/signal/stimulus.h"

namespace coldpin::rig {

struct Glitch {
    std::string what;       // one sentence for people
    std::size_t frame = 0;  // where, about
};

struct ContentReport {
    std::vector<Glitch> glitches;
    bool proven = false;  // the stimulus was heard clearly enough that a loss would have been seen
    std::optional<double> delay_frames;  // of the stimulus in the recording, when heard
    bool whole() const noexcept { return glitches.empty(); }
};

// Checks one channel against what was played: exact zeros on a live input (5 or more in a row, or all),
// repeated blocks, and for tones, multitones and sweeps a delay that stays constant through the capture. A
// change of one frame and more is found when the stimulus stands 20 dB out of the noise in its own band;
// where it does not, proven = false. Low in a sweep one frame is found from about 65 Hz up, seven from 30 Hz
// up; what passes below moves the response by less than 0.02 dB (one frame) and 0.05 dB (six, below 30 Hz).
// `expected_delay_frames` narrows the search when known.
ContentReport check_content(std::span<const double> channel, double rate_hz, const signal::Stimulus& stimulus,
                            std::optional<double> expected_delay_frames = std::nullopt);

}  // namespace coldpin::rig
