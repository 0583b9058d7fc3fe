// Noise: exact band and weighting in the frequency domain, referred to the input, against physics.
#pragma once

#include <optional>
#include <span>

#include "coldpin/measure/figure.h"
#include "coldpin/measure/scale.h"

namespace coldpin::measure {

struct NoiseQuestion {
    std::span<const double> recording;
    double rate_hz = 0.0;
    LevelScale scale;
    Band band;
    std::optional<KnownLevel> gain_db;
    std::optional<double> source_ohms;
    double temperature_c = 20.0;
    std::span<const double> interface_idle = {};  // interface alone, input terminated, same input gain
    // Another input of the same interface that hears the interface alone at the same moment (a reference
    // input with the generator muted): never subtracted, but when it is nearly as loud the figure is only a
    // bound.
    std::span<const double> interface_beside = {};
};

// Figures: noise_output with conditions.weighting none, A, C, 468 and conditions.detector "rms"; of 468
// besides "quasi-peak", the highest reading in the recording (one second and more, 32 kHz and more); with a
// gain noise_input_referred per weighting; with source_ohms besides noise_figure (dB, 290 K). Curve
// noise_density (V/sqrt(Hz) with a scale, 1/sqrt(Hz) of full scale without). Interface noise is subtracted as
// power with its uncertainty; when it leaves less than 3 dB the figure is a bound (at_most). Throws
// CannotMeasure for silence and for an input-referred level below the thermal noise of the stated source
// beyond its uncertainty (naming the likely cause: level reference, gain or termination); UsageError for less
// than 0.25 s, a band outside (0, rate/2), or a source or temperature that cannot be. The uncertainty is that
// of the device's own level: it counts the finite time, and what parts of the recording differ by when that
// is more than chance (a caution says so). Hum and tones in the band are included, with a caution when they
// carry most of it.
Findings noise(const NoiseQuestion& question);

}  // namespace coldpin::measure
