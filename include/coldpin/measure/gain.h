// Gain at one frequency: synchronous detection of a tone, against the drive level or a reference channel.
#pragma once

#include <span>

#include "coldpin/measure/figure.h"
#include "coldpin/measure/scale.h"

namespace coldpin::measure {

struct GainQuestion {
    std::span<const double> recording;
    std::span<const double> reference = {};  // the tone as sent, same frames; empty when not recorded
    double rate_hz = 0.0;
    double frequency_hz = 0.0;
    KnownLevel drive_dbu;  // at the preamp's input
    LevelScale scale;      // full_scale_dbu required (UsageError otherwise)
};

// Figures: gain (dB), output_level (dBu), phase (degrees in (-180, 180], output minus reference) when a
// reference is given. The tone is looked for anywhere in the recording. Cautions: mains harmonic at the
// frequency, a level that is not steady (which the uncertainty counts), distortion above 1 %, off-frequency
// clocks (up to 500 ppm; the frequency is then fitted). Another tone is refused, naming its frequency. Throws
// CannotMeasure when no tone stands out (silence) or the recording is clipped; UsageError when it is too
// short or the rate unfit.
Findings gain(const GainQuestion& question);

}  // namespace coldpin::measure
