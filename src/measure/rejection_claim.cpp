#include "rejection_claim.h"

#include <algorithm>
#include <cmath>

#include "coldpin/measure/clipping.h"
#include "coldpin/spectrum/statistics.h"
#include "coldpin/units/error.h"
#include "coldpin/units/level.h"

namespace coldpin::measure {

namespace {

constexpr double stands_out_std = 4.0;    // chance alone passes it once in 8000
constexpr double fixture_share = 0.3162;  // -10 dB: from there the residual may be mostly the fixture's
constexpr double fewest_common = 0.5;     // of the common-mode recording that the leakage must last

}  // namespace

double Residual::amplitude() const noexcept {
    return std::sqrt(std::max(raw * raw - 2.0 * std * std, 0.0));
}

bool Residual::stands_out() const noexcept {
    return amplitude() > stands_out_std * std;
}

Claim claim_from(const Residual& residual, double known_db, std::optional<double> limit_db) {
    const double fixture = limit_db ? units::ratio_from_db(-*limit_db) : 0.0,
                 amplitude = residual.amplitude();
    // The unit's own residual may be larger than what is seen by all that the fixture converts.
    if (!residual.stands_out() || fixture > fixture_share * amplitude)
        return {-units::db_from_ratio(residual.at_most() + fixture), known_db, Bound::at_least};
    const double statistics_db = spectrum::amplitude_uncertainty_db(residual.std / amplitude);
    const double fixture_db = -units::db_from_ratio(1.0 - fixture / amplitude);
    return {-units::db_from_ratio(amplitude), spectrum::combine(known_db, statistics_db, fixture_db),
            Bound::exact};
}

double drive_uncertainty_db(const CmrrQuestion& question) {
    return spectrum::combine(question.differential_drive_dbu.uncertainty_db,
                             question.common_mode_drive_dbu.uncertainty_db);
}

double drive_ratio(const CmrrQuestion& question) {
    return units::ratio_from_db(question.differential_drive_dbu.value_db -
                                question.common_mode_drive_dbu.value_db);
}

void add_figure(Findings& findings, const Claim& claim, double frequency_hz, const CmrrQuestion& question) {
    findings.figures.push_back(
        {"common_mode_rejection", claim.value_db, "dB", claim.uncertainty_db, 2.0, claim.bound,
         Conditions{{"frequency_hz", frequency_hz},
                    {"common_mode_drive_dbu", question.common_mode_drive_dbu.value_db}}});
}

void add_curve(Findings& findings, const std::vector<double>& frequencies_hz,
               const std::vector<Claim>& claims) {
    Curve curve;
    curve.quantity = "common_mode_rejection";
    curve.x_unit = "Hz";
    curve.y_unit = "dB";
    std::vector<double> bounds;
    for (std::size_t k = 0; k < claims.size(); ++k) {
        curve.x.push_back(frequencies_hz[k]);
        curve.y.push_back(claims[k].value_db);
        curve.uncertainty.push_back(claims[k].uncertainty_db);
        if (claims[k].bound == Bound::at_least) bounds.push_back(frequencies_hz[k]);
    }
    // At these frequencies the curve is a lower bound.
    if (!bounds.empty()) curve.conditions.set("at_least_at_hz", bounds);
    findings.curves.push_back(std::move(curve));
}

std::vector<double> without_leakage(const CmrrQuestion& question) {
    std::vector<double> samples(question.common_mode.begin(), question.common_mode.end());
    if (question.leakage.empty()) return samples;
    if (static_cast<double>(question.leakage.size()) < fewest_common * static_cast<double>(samples.size()))
        throw UsageError(
            "the leakage recording lasts less than half as long as the common-mode one: it must be the same "
            "capture with the feed off (--leakage)");
    samples.resize(std::min(samples.size(), question.leakage.size()));
    for (std::size_t n = 0; n < samples.size(); ++n) samples[n] -= question.leakage[n];
    try {
        require_not_silent(samples, "");
    } catch (const CannotMeasure&) {
        throw CannotMeasure(
            "the leakage recording is the common-mode recording itself: nothing is left without it "
            "(--leakage)");
    }
    return samples;
}

}  // namespace coldpin::measure
