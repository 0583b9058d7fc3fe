// A hand-held multimeter's reading: what was typed, how sure it is, which range would be surer.
#pragma once

#include <optional>
#include <string>
#include <vector>

namespace coldpin::rig {

// Stated accuracy of a meter's AC range at the frequency of the tone: percent of reading plus digits.
struct MeterAccuracy {
    double percent = 1.0;
    double digits = 3.0;     // counts of the last place shown
    double counts = 2000.0;  // of its display: 2000 shows up to 1999, 4000 up to 3999
    bool true_rms = true;    // otherwise average-responding: right for a sine only
};

struct MeterReading {
    double volts_rms = 0.0;
    double resolution_volts = 0.0;  // one count of the last place, as typed
};

// "1.228 V", "1228mV", "1,228 V" (a comma for a point), "+4.02 dBu", "-1.8 dBV"; RMS. Throws UsageError
// naming what was found for text without a number or with another unit, for readings that no line output
// makes (above 30 V), and for those that are too small to mean anything (below 1 mV: the wrong place, DC
// range, or an open circuit).
MeterReading parse_meter_reading(const std::string& text);

// Expanded uncertainty (k = 2) in dB: accuracy limits as a rectangular distribution (GUM 4.3.7), half a count
// of resolution, and for an average-responding meter a third of the tone's distortion (a ratio).
double meter_uncertainty_db(const MeterReading& reading, const MeterAccuracy& accuracy,
                            double distortion = 0.0);

struct RangeAdvice {
    double level_change_db = 0.0;  // of the tone; 0: only another range of the meter
    double uncertainty_db = 0.0;   // that would follow
    std::string sentence;
};
// A way to half the uncertainty or less, when there is one: a more sensitive range that holds the reading, or
// a level that fills a range better, up to `headroom_db` higher. Nothing when the meter's percentage decides.
std::optional<RangeAdvice> advise_range(const MeterReading& reading, const MeterAccuracy& accuracy,
                                        double headroom_db);

}  // namespace coldpin::rig
