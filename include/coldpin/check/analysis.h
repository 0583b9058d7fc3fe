// One analysis on recordings with their descriptions: the single door from captures (live) and from files
// (stored) to the methods of `measure`, so that both give the same figures bit for bit.
#pragma once

#include <optional>
#include <string>
#include <vector>

#include "coldpin/measure/figure.h"
#include "coldpin/measure/scale.h"
#include "coldpin/signal/description.h"
#include "coldpin/signal/recording.h"

namespace coldpin::check {

// A recording that may carry its description; `name` is the file or label for messages.
struct DescribedRecording {
    std::string name;
    signal::Recording recording;
    signal::Description description;
};

// Which recordings a kind takes: `main` always (for cmrr the differential one).
struct AnalysisInputs {
    const DescribedRecording* main = nullptr;
    const DescribedRecording* common_mode = nullptr;     // cmrr
    const DescribedRecording* leakage = nullptr;         // cmrr
    const DescribedRecording* interface_idle = nullptr;  // noise
    const DescribedRecording* stimulus = nullptr;        // response, cmrr, polarity, latency
};

// What was said explicitly; wins over the descriptions.
struct AnalysisOptions {
    std::optional<int> channel;
    std::optional<int> reference_channel;
    std::optional<int> driven_channel;  // crosstalk
    std::optional<double> input_full_scale_dbu;
    std::optional<measure::Band> band;
    std::vector<double> frequencies_hz;
    std::optional<double> drive_dbu;  // gain, and cmrr's differential drive
    std::optional<double> common_mode_drive_dbu;
    std::optional<double> gain_db;
    std::optional<double> source_ohms;
    std::optional<double> temperature_c;
    std::optional<double> mains_hz;
    std::optional<double> reference_frequency_hz;
};

// Throws UsageError for an unknown kind or a missing ingredient (naming the flag that gives it), recordings
// of different rates, channels that do not exist; else as the method.
measure::Findings analyse(const std::string& kind, const AnalysisInputs& inputs,
                          const AnalysisOptions& options);

}  // namespace coldpin::check
