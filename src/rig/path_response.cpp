#include <algorithm>
#include <cmath>

#include <fmt/core.h>

#include "coldpin/units/level.h"

#include "path_looks.h"

namespace coldpin::rig {

namespace {

constexpr double flat_db = 0.5;
constexpr double edge_ratio = 0.35;     // -9 dB
constexpr double edge_of_rate = 0.485;  // converters pass up to here, resamplers of a lower rate do not

void look_at_flatness(const PathRecording& heard, PathReport& report) {
    const double at_997 = heard.magnitude(997.0);
    double most = 0.0, where = 997.0;
    const double top_hz = std::min(15000.0, 0.40 * heard.rate);
    for (double hz = 110.0; hz < top_hz; hz *= 1.12) {
        const double off = units::db_from_ratio(heard.magnitude(hz) / at_997 + 1e-12);
        if (std::abs(off) > std::abs(most)) {
            most = off;
            where = hz;
        }
    }
    report.deviation_db = std::abs(most);
    if (report.finding(PathFault::frames_lost) == nullptr &&
        report.finding(PathFault::level_dependent) == nullptr && std::abs(most) > flat_db)
        add(report, PathFault::filtered,
            fmt::format(
                "The path is not flat: {:+.1f} dB at {:.0f} Hz. A tone control or \"enhancement\" is on: "
                "switch it off in the operating system and in the interface's mixer.",
                most, where));
    // The lowest frequency from which on little passes.
    double edge_hz = 0.49 * heard.rate;
    for (double hz = 1000.0; hz < 0.489 * heard.rate; hz += 0.002 * heard.rate) {
        const auto bin = static_cast<std::size_t>(hz / heard.bin_hz);
        double sum = 0.0;
        constexpr std::size_t reach = 10;
        for (std::size_t k = bin - reach; k <= bin + reach; ++k) sum += std::norm(heard.transfer[k]);
        if (std::sqrt(sum / (2.0 * reach + 1.0)) > edge_ratio * at_997) continue;
        edge_hz = hz;
        break;
    }
    if (edge_hz > edge_of_rate * heard.rate) return;
    for (double inner_hz : common_rates_hz)
        if (inner_hz < heard.rate && edge_hz > 0.43 * inner_hz && edge_hz < 0.515 * inner_hz)
            add(report, PathFault::resampled,
                fmt::format("The path runs at {:g} kHz inside, not at {:g} kHz: "
                            "nothing passes above {:.1f} kHz. Set "
                            "the device to the rig's rate in the operating system, "
                            "or name the device itself (docs/"
                            "rig.md).",
                            inner_hz / 1000.0, heard.rate / 1000.0, edge_hz / 1000.0));
    if (report.finding(PathFault::resampled) == nullptr && heard.rate <= 96000.0)
        add(report, PathFault::filtered,
            fmt::format("Nothing passes above {:.1f} kHz, although the rate is {:g} "
                        "kHz: a filter or a resampler is "
                        "in the path.",
                        edge_hz / 1000.0, heard.rate / 1000.0));
}

void look_at_polarity(const PathRecording& heard, PathReport& report) {
    const auto response = heard.band_response(400.0, 8000.0);
    double extreme = 0.0;
    for (double v : response)
        if (std::abs(v) > std::abs(extreme)) extreme = v;
    report.polarity = extreme < 0.0 ? -1 : 1;
    if (report.polarity < 0)
        add(report, PathFault::inverted,
            "The path turns the signal over: two legs are swapped in a cable or at an adapter between "
            "output and "
            "input. Put it right, or the unit's own polarity is told wrong.");
}

}  // namespace

void look_at_response(const PathRecording& heard, PathReport& report) {
    look_at_flatness(heard, report);
    look_at_polarity(heard, report);
}

}  // namespace coldpin::rig
