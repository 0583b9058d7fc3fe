// Common-mode rejection: differential gain over common-mode gain, both measured.
#pragma once

#include <optional>
#include <span>
#include <vector>

#include "coldpin/measure/figure.h"
#include "coldpin/measure/scale.h"
#include "coldpin/signal/stimulus.h"

namespace coldpin::measure {

struct CmrrQuestion {
    std::span<const double> differential;
    std::span<const double> common_mode;
    std::span<const double> leakage = {};  // sample-aligned with common_mode, feed off; empty when not taken
    double rate_hz = 0.0;
    // Of the whole stimulus: a multitone's RMS, shared alike by its tones in both feeds, so that the share
    // cancels.
    KnownLevel differential_drive_dbu;
    KnownLevel common_mode_drive_dbu;
    std::vector<double> frequencies_hz;  // of tones; or where a sweep's figures are wanted
    std::optional<signal::Stimulus>
        differential_stimulus;  // the sweep or multitone that was played, per feed;
    std::optional<signal::Stimulus> common_mode_stimulus;  // both may be the same
    std::optional<double> rejection_limit_db;              // what the fixture's own balance allows to claim
    Band band;
};

// Figures: common_mode_rejection (dB, conditions.frequency_hz), bound at_least when noise or the fixture
// limits it; for a sweep or multitone also the curve common_mode_rejection. Tones are detected synchronously
// over all of their length, so that a residual far under the noise is found; the leakage is subtracted sample
// by sample, and 0.1 % of it stays as uncertainty. A bound claims 95 %; where the common-mode tone is not
// clearly heard it holds wherever in the recording the tone lies. Two clocks are followed. Throws
// CannotMeasure when the differential tone is missing, a recording is clipped, or a sweep's place is unknown;
// UsageError for unfit frequencies, stimuli of different kinds, or a leakage recording that is too short.
Findings common_mode_rejection(const CmrrQuestion& question);

}  // namespace coldpin::measure
