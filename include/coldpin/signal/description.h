// The description that lies beside a WAV file written by coldpin (NAME.wav + NAME.json, schema
// "coldpin-recording/1"): what was played, which channel is what, and how samples become volts.
//
// Every member is optional, since a rendered stimulus has no volts and a foreign recording has nothing.
// Uncertainties are expanded (k = 2), in dB.
#pragma once

#include <filesystem>
#include <optional>
#include <string>
#include <vector>

#include "coldpin/signal/stimulus.h"

namespace coldpin::signal {

struct Description {
    std::optional<Stimulus> stimulus;

    // How the preamp's input was fed: "differential", "common-mode", "idle" (generator muted), or empty.
    std::string feed;
    std::string setting;       // of the gain control, as the device profile names it
    std::string unit_channel;  // which channel of the device under test; empty for a one-channel unit
    std::optional<int> device_channel;     // channel of this file (from 1) with the preamp's output
    std::optional<int> reference_channel;  // channel of this file with what was sent, if recorded

    std::optional<double> input_full_scale_dbu;
    std::optional<double> input_uncertainty_db;
    std::optional<double> drive_dbu;  // level at the preamp's input: differential, or common mode by `feed`
    std::optional<double> drive_uncertainty_db;
    std::optional<double> gain_db;  // measured at this setting before, for input-referred figures
    std::optional<double> gain_uncertainty_db;
    std::optional<double> source_ohms;
    std::optional<double> temperature_c;
    // The input's clock against the output's, when they are two: the samples are as they came, an analysis
    // takes them at the output's rate.
    std::optional<double> clock_ppm;
    std::optional<double> rejection_limit_db;  // what the fixture's own balance can prove at most

    std::vector<std::string> remarks;  // retakes, driver flags: for people
    bool operator==(const Description&) const = default;
};

// NAME.json beside NAME.wav.
std::filesystem::path description_path(const std::filesystem::path& wav_file);

// As JSON text, and back. `source` names the file in messages. Unknown members are ignored (a newer version
// may have written them); wrong types, a wrong schema or a broken text throw UsageError.
std::string to_json_text(const Description& description);
Description description_from_json_text(const std::string& text, const std::string& source);

// Nothing when no description lies beside the file; UsageError when it is broken.
std::optional<Description> read_description(const std::filesystem::path& wav_file);

// Atomically, like write_wav(). Throws UsageError.
void write_description(const std::filesystem::path& wav_file, const Description& description);

}  // namespace coldpin::signal
