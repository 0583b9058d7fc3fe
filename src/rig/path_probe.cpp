#include "path_probe.h"

#include <cmath>
#include <numbers>
#include <utility>

#include <fmt/core.h>

#include "coldpin/rig/path_check.h"
#include "coldpin/units/error.h"
#include "coldpin/units/level.h"

namespace coldpin::rig {

namespace {

constexpr double two_pi = 2.0 * std::numbers::pi;
constexpr double step_s = 0.003;  // of a stair's edge
constexpr std::array<double, 4> stair_levels_db = {-20.0, -10.0, 0.0, -20.0};
constexpr std::array<double, 4> stair_lengths_s = {0.07, 0.07, 0.10, 0.08};

// From 0 at the beginning of an edge to 1 at its end.
double raised(double along) {
    if (along <= 0.0) return 0.0;
    return along >= 1.0 ? 1.0 : 0.5 - 0.5 * std::cos(std::numbers::pi * along);
}

}  // namespace

PathProbe make_path_probe(double rate_hz, double level_dbfs) {
    if (!(rate_hz >= 16000.0) || !(rate_hz <= 1e6))
        throw UsageError(fmt::format("the path check needs 16 kHz and more, not {:g} Hz", rate_hz));
    if (!(level_dbfs <= 0.0) || !(level_dbfs > -120.0))
        throw UsageError(fmt::format("the path check cannot play at {:g} dBFS", level_dbfs));
    PathProbe probe;
    probe.rate_hz = rate_hz;
    probe.level_dbfs = level_dbfs;
    probe.high_hz = 0.46 * rate_hz;
    std::size_t at = 0;
    const auto take = [&](double length_s, double level_db) {
        const auto frames = static_cast<std::size_t>(length_s * rate_hz);
        const ProbePart part{at, at + frames, level_db};
        at += frames;
        return part;
    };
    take(0.01, 0.0);
    for (std::size_t k = 0; k < stair_levels_db.size(); ++k)
        probe.stairs[k] = take(stair_lengths_s[k], stair_levels_db[k]);
    take(0.01, 0.0);
    probe.high_tone = take(0.07, -6.0);
    take(0.01, 0.0);
    probe.sweep.kind = signal::Sweep{40.0, 0.495 * rate_hz};
    probe.sweep.length_s = 0.25;
    probe.sweep.rate_hz = rate_hz;
    probe.sweep.level_dbfs = level_dbfs - 3.0;
    probe.sweep.fade_s = 0.0003;  // or the end of the band would fade
    probe.sweep_part = take(probe.sweep.length_s, -3.0);
    probe.sweep_part.end = probe.sweep_part.begin + signal::frame_count(probe.sweep);
    at = probe.sweep_part.end;
    take(0.05, 0.0);  // the sweep's own echoes die first
    probe.anchor = take(0.035, -10.0);
    probe.frames = probe.anchor.end;
    return probe;
}

std::vector<double> render(const PathProbe& probe) {
    std::vector<double> samples(probe.frames, 0.0);
    const double rate = probe.rate_hz, edge = step_s * rate;
    const double peak = units::sine_peak_from_dbfs(probe.level_dbfs);
    for (std::size_t k = 0; k < probe.stairs.size(); ++k) {
        const ProbePart& part = probe.stairs[k];
        const double before = k == 0 ? 0.0 : units::ratio_from_db(probe.stairs[k - 1].level_db),
                     here = units::ratio_from_db(part.level_db);
        for (std::size_t n = part.begin; n < part.end; ++n) {
            double size = before + (here - before) * raised(static_cast<double>(n - part.begin) / edge);
            if (k + 1 == probe.stairs.size()) size *= raised(static_cast<double>(part.end - n) / edge);
            samples[n] =
                peak * size * std::sin(two_pi * std::fmod(probe.low_hz * static_cast<double>(n) / rate, 1.0));
        }
    }
    for (const auto& [part, hz] : {std::pair{&probe.high_tone, probe.high_hz}, {&probe.anchor, probe.low_hz}})
        for (std::size_t n = part->begin; n < part->end; ++n) {
            const double size = raised(static_cast<double>(n - part->begin) / edge) *
                                raised(static_cast<double>(part->end - n) / edge) *
                                units::ratio_from_db(part->level_db);
            samples[n] = peak * size * std::sin(two_pi * std::fmod(hz * static_cast<double>(n) / rate, 1.0));
        }
    const auto swept = signal::render(probe.sweep);
    for (std::size_t n = 0; n < swept.size(); ++n) samples[probe.sweep_part.begin + n] = swept[n];
    return samples;
}

std::vector<double> render_path_probe(double rate_hz, double level_dbfs) {
    return render(make_path_probe(rate_hz, level_dbfs));
}

}  // namespace coldpin::rig
