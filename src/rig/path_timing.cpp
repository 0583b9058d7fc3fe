#include <algorithm>
#include <cmath>
#include <functional>
#include <numbers>

#include <fmt/core.h>

#include "coldpin/spectrum/statistics.h"

#include "path_looks.h"

namespace coldpin::rig {

using spectrum::median;

namespace {

constexpr double two_pi = 2.0 * std::numbers::pi;
constexpr double clock_ppm_limit = 1.0;
constexpr double clock_wander_ppm = 3.0;

using Lost = std::function<void(const std::string&)>;

// The phase at which the series steps, after its slope is taken out; 0 when it does not.
double step_of(const Phases& series) {
    double largest = 0.0;
    std::vector<double> flat;
    for (std::size_t k = 0; k < series.rad.size(); ++k)
        flat.push_back(series.rad[k] - series.slope_rad_per_frame * (series.frame[k] - series.frame[0]));
    for (std::size_t k = 2; k + 2 <= flat.size(); ++k) {
        const std::vector<double> before(flat.begin(), flat.begin() + static_cast<std::ptrdiff_t>(k)),
            after(flat.begin() + static_cast<std::ptrdiff_t>(k), flat.end());
        const double step = median(after) - median(before);
        if (std::abs(step) > std::abs(largest)) largest = step;
    }
    return largest;
}

void find_clock(const PathRecording& heard, const Phases& low, PathReport& report) {
    const double ppm = low.slope_rad_per_frame / (two_pi * heard.probe.low_hz / heard.rate) * 1e6;
    // A clock that runs fast at the input takes more frames: the tone looks slower.
    report.clock_ppm = -ppm;
    const double std_ppm = low.spread_rad / (two_pi * heard.probe.low_hz / heard.rate) * 1e6 /
                           (low.frame.back() - low.frame.front()) * 4.0;
    report.clock_std_ppm = std_ppm;
    if (std::abs(ppm) < std::max(clock_ppm_limit, sure_of_path * std_ppm)) return;
    // A jump bends the slope little, since it is a median; a wander differs from half to half.
    const std::size_t half = low.rad.size() / 2;
    const auto slope = [&](std::size_t first, std::size_t last) {
        std::vector<double> turns;
        for (std::size_t k = first + 1; k < last; ++k)
            turns.push_back((low.rad[k] - low.rad[k - 1]) / (low.frame[k] - low.frame[k - 1]));
        return median(turns) / (two_pi * heard.probe.low_hz / heard.rate) * 1e6;
    };
    const double wander = std::abs(slope(0, half) - slope(half, low.rad.size()));
    if (wander > std::max(clock_wander_ppm, 4.0 * sure_of_path * std_ppm))
        add(report, PathFault::unsteady_clocks,
            fmt::format("Output and input run from different clocks that wander against each other (by "
                        "{:.0f} ppm "
                        "within half a second). Use one interface for both, or lock their clocks.",
                        wander));
    else
        add(report, PathFault::two_clocks,
            fmt::format(
                "Output and input run from different clocks: the input's is {:+.1f} ppm off. Steady, so "
                "it can be corrected; one interface for both is better.",
                -ppm),
            false);
}

void compare_delays(const PathRecording& heard, const Phases& low, PathReport& report, const Lost& lost) {
    const double clock = report.clock_ppm.value_or(0.0) * 1e-6;
    // Of each band at the moment when the sweep is there.
    const auto& sweep = std::get<signal::Sweep>(heard.probe.sweep.kind);
    const double constant_s = signal::sweep_time_constant_s(sweep, heard.probe.sweep.length_s);
    std::vector<double> delays;
    const double top_hz = std::min(15000.0, 0.36 * heard.rate);
    const double middle_size = heard.band_peak(1000.0, 4000.0).size;
    for (const auto& [from, to] :
         {std::pair{1000.0, 4000.0}, {250.0, 1000.0}, {4000.0, top_hz}, {0.9 * top_hz, 0.44 * heard.rate}}) {
        const BandPeak peak = heard.band_peak(from, to);
        // A band that hardly passes has no delay to speak of. Bands are weighed by their width.
        if (peak.size * 3000.0 / (to - from) < 0.3 * middle_size) continue;
        const double at_s = constant_s * std::log(std::sqrt(from * to) / sweep.from_hz);
        const double frames = static_cast<double>(heard.probe.sweep_part.begin) + at_s * heard.rate;
        delays.push_back(peak.delay - clock * frames);
    }
    const auto [least, most] = std::minmax_element(delays.begin(), delays.end());
    // Filters and shelves delay the bands by a few frames; fewer lost ones show between the tones.
    if (*most - *least > 8.0) lost(fmt::format("within the sweep, by about {:.0f}", *most - *least));
    report.latency_frames = delays.front() + static_cast<double>(heard.lag);
    // The staircase against the sweep: the tone's phase tells its delay up to whole periods.
    const double frame_rad = two_pi * heard.probe.low_hz / heard.rate;
    const double middle = low.rad[low.rad.size() / 2], frame = low.frame[low.rad.size() / 2];
    // A sine, in a transform that takes a cosine for real: a quarter turn.
    double ahead = std::remainder(middle + 0.5 * std::numbers::pi, two_pi);
    const double expected = -frame_rad * (delays.front() + clock * frame);
    ahead = std::remainder(ahead - expected, std::numbers::pi);  // either polarity
    const double frames = std::abs(ahead) / frame_rad;
    if (frames > 4.0) lost(fmt::format("between tone and sweep, by about {:.0f} or more", frames));
    // And the tone behind the sweep against the one before it.
    const auto edge = static_cast<std::size_t>(0.004 * heard.rate);
    const ProbePart& anchor = heard.probe.anchor;
    const double later = std::arg(heard.phasor(anchor.begin + edge, anchor.end - edge, heard.probe.low_hz));
    const double later_frame = 0.5 * static_cast<double>(anchor.begin + anchor.end);
    const double slip =
        std::abs(std::remainder(later - middle - low.slope_rad_per_frame * (later_frame - frame), two_pi)) /
        frame_rad;
    if (slip > std::max(2.5, sure_of_path * low.spread_rad / frame_rad) &&
        report.finding(PathFault::unsteady_clocks) == nullptr)
        lost(fmt::format("between the first tone and the last, by about {:.0f} or more", slip));
}

void find_zeros(const PathRecording& heard, const Lost& lost) {
    std::size_t run = 0, longest = 0;
    for (double v : heard.part(heard.probe.stairs.front().begin, heard.probe.frames)) {
        run = v == 0.0 ? run + 1 : 0;
        longest = std::max(longest, run);
    }
    constexpr std::size_t dead_zeros = 8;
    if (longest >= dead_zeros) lost(fmt::format("{} exact zeros in a row", longest));
}

}  // namespace

void look_at_timing(const PathRecording& heard, PathReport& report) {
    const auto edge = static_cast<std::size_t>(0.004 * heard.rate);
    const Phases low = heard.phases(heard.probe.stairs.front().begin + edge,
                                    heard.probe.stairs.back().end - edge, heard.probe.low_hz);
    const Phases high = heard.phases(heard.probe.high_tone.begin + edge, heard.probe.high_tone.end - edge,
                                     heard.probe.high_hz);
    if (low.rad.empty()) return;
    find_clock(heard, low, report);
    const auto lost = [&](const std::string& how) {
        add(report, PathFault::frames_lost,
            fmt::format(
                "Frames were lost or repeated on the way ({}), whether the driver says so or not. Close "
                "other programs, use a larger buffer (frames_per_buffer), another USB port or cable.",
                how));
    };
    const double frame_rad = two_pi * heard.probe.low_hz / heard.rate;
    const double step = step_of(low);
    if (std::abs(step) > std::max({0.9 * frame_rad, sure_of_path * low.spread_rad, 0.05}))
        lost(fmt::format("the {:g} Hz tone jumps by {:.2f} turns", heard.probe.low_hz,
                         std::abs(step) / two_pi));
    // Where little of the high tone passes, its phase says nothing.
    if (!high.rad.empty() && high.spread_rad < 0.2) {
        const double jump = step_of(high);
        if (std::abs(jump) > std::max(sure_of_path * high.spread_rad, 0.6))
            lost(fmt::format("the {:g} Hz tone jumps by {:.2f} turns", heard.probe.high_hz,
                             std::abs(jump) / two_pi));
    }
    compare_delays(heard, low, report, lost);
    find_zeros(heard, lost);
}

}  // namespace coldpin::rig
