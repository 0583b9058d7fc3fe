// What a type of preamp should do: requirements, plan, and the unit the simulated rig pretends to be.
// TOML, schema "coldpin-device/1".
#pragma once

#include <filesystem>
#include <optional>
#include <string>
#include <vector>

#include "coldpin/measure/figure.h"
#include "coldpin/measure/scale.h"
#include "coldpin/rig/setup.h"

namespace coldpin::profile {

struct GainSetting {
    std::string name;                       // as printed at the control: "40 dB", "max"
    std::optional<double> nominal_gain_db;  // for drive levels and limits
};

// y between low and high at f, straight lines in between over log f; outside the points nothing is asked.
struct MaskPoint {
    double frequency_hz = 0.0;
    std::optional<double> min;
    std::optional<double> max;
};

struct Requirement {
    std::string quantity;
    std::string setting;             // empty: every setting that was measured
    measure::Conditions conditions;  // weighting, frequency_hz, harmonic ... that the figure must have
    std::optional<double> min;
    std::optional<double> max;
    std::vector<MaskPoint> mask;  // for curves; rising in frequency, each limit at two points or more
    std::string unit;
    std::string why;  // one sentence for the sheet
    int line = 0;     // in the profile
};

struct PlanStep {
    std::string measure;  // "gain", "response", "noise", "hum", "cmrr", "distortion", "polarity",
                          // "latency"
    std::string setting;
    std::optional<double> drive_dbu;              // differential; absent: chosen so that the output is +4 dBu
    std::optional<double> common_mode_drive_dbu;  // absent: 0 dBu, within the rig's limits
    std::vector<double> frequencies_hz;           // absent: 997 (gain); 85, 997, 9973 (cmrr)
    std::optional<double> from_hz;                // sweeps; absent: 10 Hz (or the band) to 0.46 of the rate
    std::optional<double> to_hz;
    std::optional<double> length_s;  // 0.05 to 120 s
    measure::Band band;
    std::optional<double> mains_hz;
    std::string stimulus;  // cmrr: "tones" (default) or "sweep"
    int line = 0;
};

struct DeviceProfile {
    std::string name;
    std::string maker;
    std::string description;
    std::vector<std::string> channels;  // empty: one channel without a name
    double rated_source_ohms = 150.0;
    std::vector<GainSetting> settings;  // at least one; a unit without a control has one with an empty name
    std::vector<std::string> cautions;  // shown before connecting: phantom power, valves, ribbon
    std::vector<Requirement> requirements;
    std::vector<PlanStep> plan;
    std::optional<rig::SimulatedPreamp> simulated;

    std::string source_text;  // the TOML as read, kept with every run
    std::string source_name;  // file name without folders

    const GainSetting* find_setting(const std::string& setting) const;
};

// Throw UsageError "file:line:column: in [table] key: found X, expected Y; did you mean 'Z'?" for syntax,
// types, unknown keys (with the nearest known one), another schema, min above max, unknown quantities, units
// and conditions, settings that are not declared or declared twice, an empty plan, numbers out of range or
// not finite. And for what would quietly not be done: requirements that no plan step measures, frequencies
// that no step plays, a mask beyond the sweep, a requirement that leaves open which of several tones it
// means, keys that a step of its kind ignores, a pretended unit whose gains do not fit the settings.
DeviceProfile read_device_profile(const std::filesystem::path& file);
DeviceProfile device_profile_from_text(const std::string& text, const std::string& source_name);

}  // namespace coldpin::profile
