// Levels and ratios in decibels, and the volts and sample values behind them.
//
// References (each function names its own): dBu re sqrt(0.6) V RMS; dBV re 1 V RMS; dBFS: a sine whose peak
// reaches digital full scale (sample value 1.0) is 0 dBFS (AES17, IEC 61606), so its RMS is 0.7071.
// All functions are pure and noexcept; a ratio or RMS of zero gives minus infinity, so test before printing.
#pragma once

#include <cmath>

namespace coldpin::units {

inline constexpr double volts_rms_at_0_dbu = 0.77459666924148337704;    // sqrt(0.6)
inline constexpr double sample_rms_at_0_dbfs = 0.70710678118654752440;  // of a full-scale sine
inline constexpr double dbu_at_0_dbv = 2.2184874961635636749;           // 20 lg(1 / sqrt(0.6))

// 20 lg of an amplitude ratio, and back.
inline double db_from_ratio(double amplitude_ratio) noexcept {
    return 20.0 * std::log10(amplitude_ratio);
}
inline double ratio_from_db(double db) noexcept {
    return std::pow(10.0, db / 20.0);
}

// 10 lg of a power ratio, and back.
inline double db_from_power_ratio(double power_ratio) noexcept {
    return 10.0 * std::log10(power_ratio);
}
inline double power_ratio_from_db(double db) noexcept {
    return std::pow(10.0, db / 10.0);
}

inline double volts_rms_from_dbu(double level_dbu) noexcept {
    return volts_rms_at_0_dbu * ratio_from_db(level_dbu);
}
inline double dbu_from_volts_rms(double volts_rms) noexcept {
    return db_from_ratio(volts_rms / volts_rms_at_0_dbu);
}
inline double dbv_from_dbu(double level_dbu) noexcept {
    return level_dbu - dbu_at_0_dbv;
}
inline double dbu_from_dbv(double level_dbv) noexcept {
    return level_dbv + dbu_at_0_dbv;
}

// Between the RMS of sample values (full scale = 1.0) and dBFS, and between dBFS and the peak of a sine.
inline double dbfs_from_sample_rms(double sample_rms) noexcept {
    return db_from_ratio(sample_rms / sample_rms_at_0_dbfs);
}
inline double sample_rms_from_dbfs(double level_dbfs) noexcept {
    return sample_rms_at_0_dbfs * ratio_from_db(level_dbfs);
}
inline double sine_peak_from_dbfs(double level_dbfs) noexcept {
    return ratio_from_db(level_dbfs);
}

// A small relative error (0.01 = 1 %) of an amplitude, as decibels: the first-order slope 20/ln 10.
inline constexpr double db_per_relative_amplitude = 8.6858896380650365530;

}  // namespace coldpin::units
