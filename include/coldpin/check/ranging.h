// The highest drive that clips nothing, found in at most four short captures.
#pragma once

#include <string>
#include <vector>

#include "coldpin/rig/session.h"

namespace coldpin::check {

struct DriveRange {
    double drive_dbu = 0.0;   // at the preamp's input, with the margin taken off
    double output_dbu = 0.0;  // at its output then
    int captures = 0;
    std::string limited_by;  // "the rig's limit at the preamp's input", "the interface's input" ...
    std::vector<std::string> sentences;  // what decides the results at this level, and what would help
};

// Begins at `start_dbu` (harmless for the unit) and keeps 3 dB below what clips: the unit (1 % distortion, or
// half a decibel of gain lost), the interface's input, its output, and every limit of the rig, which is never
// exceeded on the way either. The wiring must be in force. Throws CannotMeasure when nothing of the tone is
// heard, UsageError when even the start exceeds a limit.
DriveRange find_drive(rig::Session& session, int device_input, double start_dbu);

}  // namespace coldpin::check
