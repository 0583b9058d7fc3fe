#include <algorithm>
#include <array>
#include <cmath>

#include <fmt/core.h>

#include "coldpin/spectrum/statistics.h"
#include "coldpin/units/level.h"

#include "path_looks.h"

namespace coldpin::rig {

using spectrum::median;

namespace {

// Converters hold a level step to a hundredth of a decibel and a level to a few hundredths; a limiter misses
// by tenths and more.
constexpr double level_step_db = 0.06;
constexpr double level_moved_db = 0.08;
constexpr double clipped_ratio = 0.01;

// Amplitude noise in a tone's own window: what stands at frequencies beside it.
double noise_beside(const PathRecording& heard, const ProbePart& stair) {
    std::vector<double> sizes;
    for (double away : {-310.0, -230.0, -170.0, 190.0, 270.0, 330.0})
        sizes.push_back(std::abs(heard.phasor(stair.begin + static_cast<std::size_t>(0.006 * heard.rate),
                                              stair.end - static_cast<std::size_t>(0.003 * heard.rate),
                                              heard.probe.low_hz + away)));
    return median(sizes) / 1.1774;  // Rayleigh's median, per component
}

void measure_distortion(const PathRecording& heard, PathReport& report) {
    const auto& loud = heard.probe.stairs[2];
    const auto edge = static_cast<std::size_t>(0.006 * heard.rate);
    const double fundamental = std::abs(heard.phasor(loud.begin + edge, loud.end - edge, heard.probe.low_hz));
    double sum = 0.0;
    for (int number = 2; number <= 5; ++number)
        if (number * heard.probe.low_hz < 0.45 * heard.rate)
            sum += std::norm(heard.phasor(loud.begin + edge, loud.end - edge, number * heard.probe.low_hz));
    const double ratio = std::sqrt(sum) / (fundamental + 1e-12);
    report.distortion_db = units::db_from_ratio(ratio + 1e-12);
    if (ratio > clipped_ratio && report.finding(PathFault::level_dependent) == nullptr)
        add(report, PathFault::clipped,
            fmt::format(
                "{:.1f} % of distortion at the highest level: the output or the input is driven into its "
                "limits. Turn the output or the input down and calibrate again.",
                100.0 * ratio));
}

}  // namespace

void look_at_levels(const PathRecording& heard, const PathExpectation& expectation, PathReport& report) {
    const auto edge = static_cast<std::size_t>(0.006 * heard.rate);
    std::array<double, 4> levels{}, early{}, late{};
    for (std::size_t k = 0; k < heard.probe.stairs.size(); ++k) {
        const auto& stair = heard.probe.stairs[k];
        const std::size_t begin = stair.begin + edge, end = stair.end - (k == 3 ? edge : edge / 2);
        const std::size_t piece = (end - begin) / 3;
        const auto level = [&](std::size_t from, std::size_t to) {
            return units::db_from_ratio(std::abs(heard.phasor(from, to, heard.probe.low_hz)) + 1e-12) -
                   stair.level_db;
        };
        levels[k] = level(begin, end);
        early[k] = level(begin, begin + piece);
        late[k] = level(end - piece, end);
    }
    const double noise = noise_beside(heard, heard.probe.stairs[0]);
    const double quiet_std_db = units::db_per_relative_amplitude * noise /
                                (units::ratio_from_db(levels[0] + heard.probe.stairs[0].level_db));
    report.gain_db = levels[2] - heard.probe.level_dbfs;
    report.gain_std_db = units::db_per_relative_amplitude * noise / units::ratio_from_db(levels[2]);
    const double limit = std::max(level_step_db, sure_of_path * quiet_std_db);
    double most = 0.0, course = 0.0;
    for (std::size_t k = 0; k < levels.size(); ++k) {
        most = std::max(most, std::abs(levels[k] - levels[2]));
        course = std::max(course, std::abs(late[k] - early[k]));
    }
    // An echo of the loud step stands in the quiet one after it.
    if (report.finding(PathFault::frames_lost) == nullptr && report.finding(PathFault::echo) == nullptr &&
        (most > limit || course > 2.0 * limit))
        add(report, PathFault::level_dependent,
            fmt::format(
                "The gain of the path depends on the level: {:.2f} dB between tones 20 dB apart{}. An "
                "automatic gain, limiter or compressor is on: switch it off in the operating system and "
                "in "
                "the interface's mixer.",
                most, course > 2.0 * limit ? fmt::format(", {:.2f} dB within one of them", course) : ""));
    measure_distortion(heard, report);
    if (!expectation.gain_db) return;
    const double off = *report.gain_db - *expectation.gain_db;
    if (std::abs(off) > std::max(level_moved_db, sure_of_path * *report.gain_std_db))
        add(report, PathFault::level_moved,
            fmt::format("The level here is {:+.2f} dB from what the calibration "
                        "saw: a knob was moved, or the plug "
                        "is another one. Put it back, or run coldpin calibrate.",
                        off));
}

}  // namespace coldpin::rig
