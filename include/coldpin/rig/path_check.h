// Is the path from output to input honest? One second of probe through a loop or a reference tap tells
// whether the operating system, the interface's mixer, its clocks or a moved knob change what is measured.
#pragma once

#include <optional>
#include <span>
#include <string>
#include <vector>

namespace coldpin::rig {

enum class PathFault {
    not_heard,        // nothing of the probe arrives
    resampled,        // the path runs at another rate inside
    level_dependent,  // automatic gain, limiter, compressor
    filtered,         // tone control, "enhancement"
    echo,             // the input is mixed into the output: a loop
    inverted,         // legs swapped, or an inverting path
    frames_lost,      // dropouts, whether the driver says so or not
    two_clocks,       // output and input run from different clocks, steadily
    unsteady_clocks,  // ... and unsteadily
    level_moved,      // not the level that the calibration saw: a knob was moved
    clipped,          // at either converter
};

struct PathFinding {
    PathFault fault = PathFault::not_heard;
    std::string sentence;  // what was found and what to do
    // A wrong number would follow: measure only after it is put right. Otherwise it is worth knowing.
    bool spoils = true;
};

// What the probe showed; what could not be told is absent.
struct PathReport {
    std::vector<PathFinding> findings;
    std::optional<double> gain_db;  // dBFS in over dBFS out, at 997 Hz
    std::optional<double> gain_std_db;
    std::optional<double> latency_frames;  // fractional, from the probe's first frame as recorded
    std::optional<double> deviation_db;    // largest from flat, 100 Hz to 15 kHz
    std::optional<double> clock_ppm;       // the input's clock against the output's
    std::optional<double> clock_std_ppm;
    std::optional<double> distortion_db;  // harmonics 2 to 5 at the highest level, re the fundamental
    int polarity = 0;                     // +1, -1; 0: not told
    bool honest() const noexcept;         // no finding that spoils
    const PathFinding* finding(PathFault fault) const;
};

struct PathExpectation {
    std::optional<double> gain_db;  // what the calibration saw
};

// The probe: 997 Hz at level - 20, - 10, 0 and - 20 dB, a tone at 0.46 of the rate, a sweep to 0.495 of the
// rate; about 0.76 s. `level_dbfs` is that of its loudest tone, at most 0.
std::vector<double> render_path_probe(double rate_hz, double level_dbfs);

// The recording begins with the probe's first frame or before, and goes on for at least 0.1 s behind its end.
// Throws UsageError for an unfit rate (below 16 kHz) or level. Pure; any thread.
PathReport check_path(std::span<const double> recording, double rate_hz, double level_dbfs,
                      const PathExpectation& expectation = {});

}  // namespace coldpin::rig
