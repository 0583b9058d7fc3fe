#include "coldpin/measure/clipping.h"

#include <algorithm>
#include <cmath>

#include <fmt/core.h>

#include "coldpin/units/error.h"

namespace coldpin::measure {

namespace {

constexpr double full_scale = 0.9999;
constexpr double dead = 1e-9;  // -180 dBFS: below the last bit of any converter
constexpr double smallest_flat = 0.01;

// The crest of a slow sine is flat too when a 16-bit converter rounds it: over a run of m samples it bends by
// at most one step, so m samples further out it has fallen by 9 steps at most ((3/1)^2). A limited signal has
// its full slope there.
bool falls_away(std::span<const double> samples, std::size_t begin, std::size_t end, double step) {
    const std::size_t reach = end - begin;
    if (begin < reach || end + reach > samples.size()) return true;  // cut off: no crest to be seen
    const double level = samples[begin];
    return std::abs(level - samples[begin - reach]) > 20.0 * step &&
           std::abs(level - samples[end - 1 + reach]) > 20.0 * step;
}

}  // namespace

Clipping find_clipping(std::span<const double> samples) {
    double top = 0.0, bottom = 0.0, step = 1.0, before = 0.0;
    for (double x : samples) {
        top = std::max(top, x);
        bottom = std::min(bottom, x);
        // The smallest change there is: a step of the converter, or next to nothing in floating point.
        if (x != before) step = std::min(step, std::abs(x - before));
        before = x;
    }
    Clipping clipping;
    // A limiter below full scale holds one exact value for several samples, again and again; a sine's crest
    // with noise on it, or sampled at any ordinary frequency, does not. Small signals are spared: a few steps
    // of a 16-bit converter are equal by nature.
    for (std::size_t n = 0; n < samples.size();) {
        const double x = samples[n];
        std::size_t end = n + 1;
        if (std::abs(x) > smallest_flat && (x >= top || x <= bottom)) {
            while (end < samples.size() && samples[end] == x) ++end;
            if (end - n >= 3 && falls_away(samples, n, end, step)) ++clipping.flat_runs;
        }
        if (std::abs(x) >= full_scale) clipping.samples_at_full_scale += end - n;
        n = end;
    }
    return clipping;
}

void require_unclipped(std::span<const double> samples, const char* what) {
    const Clipping clipping = find_clipping(samples);
    if (!clipping.clipped()) return;
    throw CannotMeasure(
        clipping.samples_at_full_scale >= 2
            ? fmt::format("{} is clipped: {} samples at full scale; turn the input gain or the drive down",
                          what, clipping.samples_at_full_scale)
            : fmt::format("{} is clipped: flat tops below full scale ({} of them), so something before the "
                          "converter is at its "
                          "end stop; turn the drive or the unit's gain down",
                          what, clipping.flat_runs));
}

void require_not_silent(std::span<const double> samples, const char* what) {
    const bool silent =
        std::all_of(samples.begin(), samples.end(), [](double x) { return std::abs(x) < dead; });
    if (silent)
        throw CannotMeasure(
            fmt::format("{} is silent: is the unit on, is the right input recorded, is a cable out?", what));
    const bool constant = std::all_of(samples.begin(), samples.end(),
                                      [&](double x) { return std::abs(x - samples.front()) < dead; });
    if (constant)
        throw CannotMeasure(
            fmt::format("{} holds nothing but a constant offset: is the right input recorded?", what));
}

}  // namespace coldpin::measure
