// How sample values become levels, and the band that counts: shared by all methods.
#pragma once

#include <optional>

namespace coldpin::measure {

// Without a full-scale level, levels come in dBFS.
struct LevelScale {
    std::optional<double> full_scale_dbu;  // level in dBu of a 0 dBFS sine at the input
    double uncertainty_db = 0.0;           // expanded (k = 2), of the calibration

    const char* unit() const noexcept { return full_scale_dbu ? "dBu" : "dBFS"; }
    double level_from_sample_rms(double sample_rms) const noexcept;  // in unit()
    double volts_per_sample_unit() const noexcept;                   // 1 without a scale
};

struct Band {
    double low_hz = 20.0;
    double high_hz = 20000.0;
};

// A level known from elsewhere with its expanded (k = 2) uncertainty.
struct KnownLevel {
    double value_db = 0.0;
    double uncertainty_db = 0.0;
};

}  // namespace coldpin::measure
