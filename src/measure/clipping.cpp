#include "coldpin/measure/clipping.h"

#include <algorithm>
#include <cmath>

#include <fmt/core.h>

#include "coldpin/units/error.h"

namespace coldpin::measure {

namespace {

constexpr double full_scale = 0.9999;
constexpr double dead = 1e-9;  // -180 dBFS: below the last bit of any converter

}  // namespace

Clipping find_clipping(std::span<const double> samples) {
    double top = 0.0, bottom = 0.0;
    for (double x : samples) {
        top = std::max(top, x);
        bottom = std::min(bottom, x);
    }
    Clipping clipping;
    // A limiter below full scale holds one exact value for several samples, again and again; a sine's crest
    // with noise on it, or sampled at any ordinary frequency, does not. Small signals are spared: a few steps
    // of a 16-bit converter are equal by nature.
    const bool look_for_flats = std::max(top, -bottom) > 0.01;
    std::size_t run = 0;
    double held = 0.0;
    for (double x : samples) {
        if (std::abs(x) >= full_scale) ++clipping.samples_at_full_scale;
        if (!look_for_flats) continue;
        const bool extreme = x >= top || x <= bottom;
        run = extreme && x == held ? run + 1 : (extreme ? 1U : 0U);
        held = x;
        if (run == 3) ++clipping.flat_runs;
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
}

}  // namespace coldpin::measure
