// From an interface without volts to a calibrated rig: a multimeter, a tone, a loop.
#pragma once

#include <optional>
#include <string>

#include "coldpin/check/perform.h"
#include "coldpin/measure/figure.h"
#include "coldpin/rig/meter.h"
#include "coldpin/rig/path_check.h"
#include "coldpin/rig/session.h"

namespace coldpin::check {

struct CalibrateOptions {
    double level_dbfs = -6.0;  // of the tone for the meter
    rig::MeterAccuracy accuracy;
    std::string meter;                   // name and range, for the record
    std::optional<std::string> reading;  // known before; then it is not asked for
    std::optional<std::string> knobs;
    bool accept_reading = false;  // although it contradicts the loop or the calibration before
    bool whole_response = true;   // measure the loop's response over three seconds; otherwise the probe's
    std::string time_utc;
};

struct CalibrationResult {
    rig::Calibration calibration;
    measure::Findings
        findings;  // kind "calibration": the same as figures with uncertainties, and what was found
    rig::PathReport path;
};

// Guided: pad and tone, the meter's reading, the loop (sensitivity, response, noise, distortion, crosstalk,
// latency, polarity, offset, swapped or summed channels), the common-mode output, the reference tap. Plays
// 220 Hz for the meter: clear of the harmonics of both mains frequencies, and where hand-held meters are
// right. Nothing is written.
//
// Throws UsageError for readings that cannot be or that contradict the loop, CannotMeasure when the path is
// not honest (saying why and what to do), a device vanishes or an input clips at any level.
CalibrationResult calibrate(rig::Session& session, Bench& bench, const CalibrateOptions& options);

}  // namespace coldpin::check
