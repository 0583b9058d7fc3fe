#include <algorithm>
#include <cmath>

#include <fmt/core.h>

#include "coldpin/spectrum/statistics.h"
#include "coldpin/units/level.h"

#include "path_looks.h"

namespace coldpin::rig {

using spectrum::median;

namespace {

constexpr double image_ratio = 3e-5;  // -90 dB

double folded(double hz, double rate_hz) {
    hz = std::fmod(std::abs(hz), rate_hz);
    return hz > 0.5 * rate_hz ? rate_hz - hz : hz;
}

}  // namespace

// A resampler to a higher rate and back leaves mirror images of a tone near the band's end.
void look_for_images(const PathRecording& heard, PathReport& report) {
    const auto& high = heard.probe.high_tone;
    const auto edge = static_cast<std::size_t>(0.004 * heard.rate);
    const std::size_t begin = high.begin + edge, end = high.end - edge;
    const double tone = std::abs(heard.phasor(begin, end, heard.probe.high_hz));
    if (tone < 1e-4) return;
    const double width_hz = heard.rate / static_cast<double>(end - begin);
    double strongest = 0.0, inner = 0.0;
    for (double inner_hz : common_rates_hz) {
        if (std::abs(inner_hz - heard.rate) < 1.0 || inner_hz < 0.9 * heard.rate) continue;
        const double up = folded(heard.rate - heard.probe.high_hz, inner_hz);
        for (double hz : {folded(up, heard.rate), folded(inner_hz - up, heard.rate),
                          folded(inner_hz - heard.probe.high_hz, heard.rate),
                          folded(inner_hz + heard.probe.high_hz, heard.rate)}) {
            if (hz < 500.0 || hz > 0.48 * heard.rate || std::abs(hz - heard.probe.high_hz) < 8.0 * width_hz)
                continue;
            bool harmonic = false;
            for (int number = 2; number <= 7; ++number)
                harmonic = harmonic ||
                           std::abs(folded(number * heard.probe.high_hz, heard.rate) - hz) < 6.0 * width_hz;
            if (harmonic) continue;
            const double size = std::abs(heard.phasor(begin, end, hz));
            std::vector<double> beside;
            for (double away : {-9.0, -7.5, -6.0, -4.5, 4.5, 6.0, 7.5, 9.0})
                beside.push_back(std::abs(heard.phasor(begin, end, hz + away * width_hz)));
            if (size > std::max(image_ratio * tone, 7.0 * median(beside)) && size > strongest) {
                strongest = size;
                inner = inner_hz;
            }
        }
    }
    if (strongest > 0.0)
        add(report, PathFault::resampled,
            fmt::format("The path is resampled ({:g} kHz inside is likely): a tone "
                        "leaves a mirror image {:.0f} dB "
                        "down. Set the device to the rig's rate in the operating "
                        "system, or name the device itself "
                        "(docs/rig.md).",
                        inner / 1000.0, -units::db_from_ratio(strongest / tone)));
}

}  // namespace coldpin::rig
