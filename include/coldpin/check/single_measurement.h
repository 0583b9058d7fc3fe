// One measurement, now: the smallest plan that gives it, made from a device profile or from nothing.
#pragma once

#include <optional>
#include <string>
#include <vector>

#include "coldpin/measure/scale.h"
#include "coldpin/profile/device_profile.h"

namespace coldpin::check {

struct SingleMeasurement {
    std::string kind;          // "gain", "noise" ...
    std::string setting;       // empty: the profile's first, or that of its first step of this kind
    std::string unit_channel;  // empty: the profile's first
    std::optional<double> nominal_gain_db;  // for a unit without a profile: chooses the drive level
    std::optional<double> drive_dbu;
    std::optional<double> common_mode_drive_dbu;
    std::vector<double> frequencies_hz;
    std::optional<double> length_s;
    std::optional<double> mains_hz;
    std::optional<double> source_ohms;
    std::optional<measure::Band> band;
};

// A profile without requirements whose plan holds that measurement, preceded by a gain step where figures
// refer to the input (noise, hum). `device` may be null: then the unit has one setting and, unless a drive is
// given, is driven at -60 dBu, which no preamp minds. Throws UsageError for an unknown kind, setting or
// channel, naming the nearest.
profile::DeviceProfile profile_for(const SingleMeasurement& wanted, const profile::DeviceProfile* device);

}  // namespace coldpin::check
