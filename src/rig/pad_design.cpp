#include "coldpin/rig/pad_design.h"

#include <cmath>

#include <fmt/core.h>

#include "coldpin/units/error.h"
#include "coldpin/units/level.h"

namespace coldpin::rig {

namespace {

constexpr int steps_around = 3;
constexpr double loss_weight_db = 0.1, source_weight = 0.02;

PadDesign rated(const PadWish& wish, double series_ohms, double shunt_ohms) {
    PadDesign design;
    design.pad.kind = wish.kind;
    design.pad.series_ohms = series_ohms;
    design.pad.shunt_ohms = shunt_ohms;
    const double loaded =
        wish.input_ohms ? shunt_ohms * *wish.input_ohms / (shunt_ohms + *wish.input_ohms) : shunt_ohms;
    design.loss_db = units::db_from_ratio((2.0 * series_ohms + loaded) / loaded);
    design.source_ohms = 2.0 * series_ohms * shunt_ohms / (2.0 * series_ohms + shunt_ohms);
    design.loss_error_db = design.loss_db - wish.loss_db;
    design.source_error = design.source_ohms / wish.source_ohms - 1.0;
    return design;
}

double badness(const PadDesign& design) {
    // A loss can be trimmed, a source resistance cannot.
    const double beyond = std::abs(design.source_error) > 0.9 * source_weight ? 100.0 : 0.0;
    return beyond + std::hypot(design.loss_error_db / loss_weight_db, design.source_error / source_weight);
}

}  // namespace

PadDesign design_pad(const PadWish& wish) {
    if (!(wish.loss_db >= 6.0) || !(wish.loss_db <= 100.0))
        throw UsageError(fmt::format("a pad of {:g} dB: expected 6 to 100", wish.loss_db));
    if (!(wish.source_ohms >= 1.0) || !(wish.source_ohms <= 1e5))
        throw UsageError(fmt::format("a source of {:g} ohm: expected 1 to 100000", wish.source_ohms));
    if (wish.input_ohms && !(*wish.input_ohms > 0.0))
        throw UsageError(fmt::format("an input of {:g} ohm: it must be above zero", *wish.input_ohms));
    // Without rounding: the source is shunt and series in parallel, the loss their ratio.
    const double ratio = units::ratio_from_db(wish.loss_db);
    const double load = wish.input_ohms ? wish.source_ohms / *wish.input_ohms : 0.0;
    // loss = (2 S + P) / P with P = shunt || input, source = shunt || 2 S  =>  2 S = source ratio / (1 +
    // load)
    const double both = wish.source_ohms * ratio / (1.0 + load);
    const double shunt = wish.source_ohms * both / (both - wish.source_ohms);
    const bool halves = wish.kind != PadKind::floating;
    const double piece = halves ? 0.5 * shunt : shunt;
    PadDesign best;
    bool first = true;
    for (int i = -steps_around; i <= steps_around; ++i)
        for (int j = -steps_around; j <= steps_around; ++j) {
            const double shunt_part = units::preferred_value(wish.series, piece, i);
            const PadDesign tried = rated(wish, units::preferred_value(wish.series, 0.5 * both, j),
                                          halves ? 2.0 * shunt_part : shunt_part);
            if (first || badness(tried) < badness(best)) best = tried;
            first = false;
        }
    // E96 steps by 2.4 %, which is 0.2 dB: where the nearest is not near enough a small resistor in series
    // makes it up.
    if (std::abs(best.loss_error_db) < 0.8 * loss_weight_db) return best;
    const double shunt_ohms = best.pad.shunt_ohms;
    const double loaded =
        wish.input_ohms ? shunt_ohms * *wish.input_ohms / (shunt_ohms + *wish.input_ohms) : shunt_ohms;
    const double ideal = 0.5 * loaded * (ratio - 1.0);
    double large = units::preferred_value(wish.series, ideal);
    if (large > 0.999 * ideal) large = units::preferred_value(wish.series, ideal, -1);
    const double small = units::preferred_value(wish.series, ideal - large);
    const PadDesign trimmed = rated(wish, large + small, shunt_ohms);
    if (std::abs(trimmed.loss_error_db) < std::abs(best.loss_error_db)) {
        best = trimmed;
        best.series_trim_ohms = small;
    }
    return best;
}

}  // namespace coldpin::rig
