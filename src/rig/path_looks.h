// The looks at a path probe, each a file; each adds what it found to the report.
#pragma once

#include "coldpin/rig/path_check.h"

#include "path_recording.h"

namespace coldpin::rig {

// Adds a finding, once a fault.
void add(PathReport& report, PathFault fault, std::string sentence, bool spoils = true);

// Clocks, latency, lost and repeated frames.
void look_at_timing(const PathRecording& heard, PathReport& report);
// Levels, steps of level, distortion; after the timing and the echo, which spoil them.
void look_at_levels(const PathRecording& heard, const PathExpectation& expectation, PathReport& report);
// Flatness, the band's edge, polarity.
void look_at_response(const PathRecording& heard, PathReport& report);
// The input mixed back into the output.
void look_for_echo(const PathRecording& heard, PathReport& report);
// Mirror images that a resampler leaves.
void look_for_images(const PathRecording& heard, PathReport& report);

inline constexpr double sure_of_path = 7.0;  // standard deviations
inline constexpr double common_rates_hz[] = {8000,  11025, 16000, 22050, 24000,
                                             32000, 44100, 48000, 88200, 96000};

}  // namespace coldpin::rig
