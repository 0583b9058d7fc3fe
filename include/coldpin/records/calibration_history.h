// Every calibration of a rig, kept beside its file: NAME.calibrations.jsonl, one JSON document a line, only
// ever appended to.
#pragma once

#include <filesystem>
#include <string>
#include <vector>

#include "coldpin/rig/setup.h"

namespace coldpin::records {

std::filesystem::path calibration_history_path(const std::filesystem::path& rig_file);

// Appends; throws UsageError when the file cannot be written (nothing is lost then: the line is whole or
// absent).
void append_calibration(const std::filesystem::path& rig_file, const rig::Calibration& calibration);

// Oldest first; none when there is no history. A damaged line (a power cut while writing) is left out and
// counted.
struct CalibrationHistory {
    std::vector<rig::Calibration> calibrations;
    std::size_t damaged_lines = 0;
};
CalibrationHistory read_calibrations(const std::filesystem::path& rig_file);

}  // namespace coldpin::records
