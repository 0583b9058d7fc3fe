#include "coldpin/rig/path_check.h"

#include <algorithm>
#include <cmath>

#include "path_looks.h"

namespace coldpin::rig {

namespace {

constexpr double full_scale = 0.9999;

void find_clipping(const PathRecording& heard, PathReport& report) {
    std::size_t run = 0, longest = 0;
    for (double v : heard.x) {
        run = std::abs(v) >= full_scale ? run + 1 : 0;
        longest = std::max(longest, run);
    }
    if (longest >= 2)
        add(report, PathFault::clipped,
            "The input clips: its gain is too high for what is sent. Turn the input down and calibrate "
            "again.");
}

// A live input never rests on zero: its noise moves it.
bool ends_in_zeros(const PathRecording& heard) {
    constexpr double dead_s = 0.02;
    const auto count = std::min(heard.x.size(), static_cast<std::size_t>(dead_s * heard.rate));
    return std::all_of(heard.x.end() - static_cast<std::ptrdiff_t>(count), heard.x.end(),
                       [](double v) { return v == 0.0; });
}

// True when the probe is there to be looked at.
bool find_probe(PathRecording& heard, PathReport& report) {
    const auto place = heard.place();
    if (place.whole) return true;
    if (place.heard)
        add(report, PathFault::not_heard,
            "The test signal arrives too late or is cut off: the path's latency is out of the ordinary.");
    else if (ends_in_zeros(heard))
        add(report, PathFault::not_heard,
            "Exact zeros arrive from somewhere on: the device left, is switched off, or the operating system "
            "does not "
            "let programs record. Nothing was measured.");
    else
        add(report, PathFault::not_heard,
            "Nothing of the test signal arrives here: the wrong output or input, a plug, a muted channel or "
            "a knob at "
            "zero.");
    return false;
}

}  // namespace

void add(PathReport& report, PathFault fault, std::string sentence, bool spoils) {
    if (report.finding(fault) == nullptr) report.findings.push_back({fault, std::move(sentence), spoils});
}

bool PathReport::honest() const noexcept {
    return std::none_of(findings.begin(), findings.end(), [](const PathFinding& one) { return one.spoils; });
}

const PathFinding* PathReport::finding(PathFault fault) const {
    const auto found = std::find_if(findings.begin(), findings.end(),
                                    [&](const PathFinding& one) { return one.fault == fault; });
    return found != findings.end() ? &*found : nullptr;
}

PathReport check_path(std::span<const double> recording, double rate_hz, double level_dbfs,
                      const PathExpectation& expectation) {
    const PathProbe probe = make_path_probe(rate_hz, level_dbfs);
    PathRecording heard(recording, probe);
    PathReport report;
    find_clipping(heard, report);
    if (!find_probe(heard, report)) return report;
    look_at_timing(heard, report);
    look_for_echo(heard, report);
    look_at_levels(heard, expectation, report);
    look_at_response(heard, report);
    look_for_images(heard, report);
    return report;
}

}  // namespace coldpin::rig
