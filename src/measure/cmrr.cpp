#include "coldpin/measure/cmrr.h"

#include <algorithm>
#include <cmath>

#include <fmt/core.h>

#include "coldpin/measure/clipping.h"
#include "coldpin/measure/transfer.h"
#include "coldpin/spectrum/statistics.h"
#include "coldpin/spectrum/tone_extent.h"
#include "coldpin/units/error.h"
#include "coldpin/units/frequency_grid.h"
#include "coldpin/units/level.h"

#include "tone_fit.h"
#include "tone_level.h"

namespace coldpin::measure {

namespace {

using spectrum::Extent;

constexpr double stands_out = 3.0;  // standard deviations from which an amplitude is a figure, not a bound
constexpr double claim_std = 2.0;   // added to a drowned amplitude for the bound: 97.7 % one-sided
constexpr int curve_points_per_octave = 12;

// A small amplitude, without the bias that noise adds to its square.
struct Amplitude {
    double value = 0.0;
    double std = 0.0;
    bool stands() const noexcept { return value > stands_out * std; }
};

Amplitude unbiased(double raw, double std) {
    return {std::sqrt(std::max(raw * raw - 2.0 * std * std, 0.0)), std};
}

// What the fixture's own imbalance can add or hide at most, as an amplitude re the common-mode drive.
struct Claim {
    double value_db;
    double uncertainty_db;
    Bound bound;
};

// residual: common-mode gain re differential gain as an amplitude ratio.
Claim claim_from(const Amplitude& residual, double differential_relative_std, double drive_uncertainty_db,
                 std::optional<double> limit_db) {
    const double fixture = limit_db ? units::ratio_from_db(-*limit_db) : 0.0;
    const double drive = spectrum::combine(drive_uncertainty_db,
                                           spectrum::amplitude_uncertainty_db(differential_relative_std));
    if (!residual.stands())
        return {-units::db_from_ratio(residual.value + claim_std * residual.std + fixture), drive,
                Bound::at_least};
    // Within 10 dB of what the fixture itself converts, the residual may be mostly the fixture's.
    if (fixture > 0.316 * residual.value)
        return {-units::db_from_ratio(residual.value + claim_std * residual.std + fixture), drive,
                Bound::at_least};
    const double statistics_db = spectrum::amplitude_uncertainty_db(residual.std / residual.value);
    const double fixture_db = fixture > 0.0 ? -units::db_from_ratio(1.0 - fixture / residual.value) : 0.0;
    return {-units::db_from_ratio(residual.value), spectrum::combine(drive, statistics_db, fixture_db),
            Bound::exact};
}

Figure figure_from(const Claim& claim, double frequency_hz, const CmrrQuestion& question) {
    return {"common_mode_rejection",
            claim.value_db,
            "dB",
            claim.uncertainty_db,
            2.0,
            claim.bound,
            Conditions{{"frequency_hz", frequency_hz},
                       {"common_mode_drive_dbu", question.common_mode_drive_dbu.value_db}}};
}

double drive_uncertainty(const CmrrQuestion& question) {
    return spectrum::combine(question.differential_drive_dbu.uncertainty_db,
                             question.common_mode_drive_dbu.uncertainty_db);
}

double drive_ratio(const CmrrQuestion& question) {
    return units::ratio_from_db(question.differential_drive_dbu.value_db -
                                question.common_mode_drive_dbu.value_db);
}

std::vector<double> without_leakage(const CmrrQuestion& question) {
    std::vector<double> samples(question.common_mode.begin(), question.common_mode.end());
    if (question.leakage.empty()) return samples;
    if (question.leakage.size() < samples.size()) samples.resize(question.leakage.size());
    for (std::size_t n = 0; n < samples.size(); ++n) samples[n] -= question.leakage[n];
    return samples;
}

// Where the tones of the common-mode recording sound. They may lie far under the noise: the one that stands
// out best shows the way; without any, the place where the differential ones sounded if the recordings are
// alike.
Extent common_mode_extent(std::span<const double> samples, const CmrrQuestion& question,
                          const Extent& differential, std::vector<std::string>& cautions) {
    Extent best;
    for (double hz : question.frequencies_hz) {
        const Extent found = spectrum::find_tone(samples, question.rate_hz, hz);
        // Only a clear sight settles where it begins and ends.
        if (found.found && found.confidence > 200.0 && found.confidence > best.confidence) best = found;
    }
    if (best.found) return best;
    const auto frames = static_cast<double>(samples.size());
    if (std::abs(frames - static_cast<double>(question.differential.size())) < 0.02 * frames &&
        differential.end <= samples.size())
        return differential;
    cautions.push_back(
        "the common-mode tone is not clearly heard, so all of the recording is taken to hold it");
    return {0, samples.size(), 0.0, true};
}

// A tone on a mains harmonic measures hum: the hum there is not known apart, so say so.
void warn_of_hum(double mains_hz, double length_s, const CmrrQuestion& question,
                 std::vector<std::string>& cautions) {
    if (!(mains_hz > 0.0)) return;
    for (double hz : question.frequencies_hz) {
        const double number = std::round(hz / mains_hz);
        if (number >= 1.0 && std::abs(hz - number * mains_hz) < 1.5 / length_s)
            cautions.push_back(
                fmt::format("the tone at {:g} Hz lies on harmonic {:g} of the mains: hum counts as lack of "
                            "rejection there; move it between the harmonics",
                            hz, number));
    }
}

void measure_tones(Findings& findings, const CmrrQuestion& question) {
    // Each differential tone must be there; the first refuses in words when not.
    const ToneLevel first = tone_level(question.differential, question.rate_hz,
                                       question.frequencies_hz.front(), findings.cautions);
    const Extent differential_extent{first.begin, first.end, 0.0, true};
    const auto differential = fit_tones(question.differential.subspan(first.begin, first.end - first.begin),
                                        question.rate_hz, question.frequencies_hz);
    const std::vector<double> common_mode = without_leakage(question);
    const Extent extent = common_mode_extent(common_mode, question, differential_extent, findings.cautions);
    const auto stretch = std::span(common_mode).subspan(extent.begin, extent.end - extent.begin);
    const auto common = fit_tones(stretch, question.rate_hz, question.frequencies_hz);
    warn_of_hum(common.mains_hz, static_cast<double>(stretch.size()) / question.rate_hz, question,
                findings.cautions);
    for (std::size_t k = 0; k < question.frequencies_hz.size(); ++k) {
        if (!(std::abs(differential.phasors[k]) > 8.0 * differential.std[k]))
            throw CannotMeasure(fmt::format("the differential recording holds no clear tone at {:g} Hz",
                                            question.frequencies_hz[k]));
        const double scale = drive_ratio(question) / std::abs(differential.phasors[k]);
        const Claim claim = claim_from(unbiased(std::abs(common.phasors[k]) * scale, common.std[k] * scale),
                                       differential.std[k] / std::abs(differential.phasors[k]),
                                       drive_uncertainty(question), question.rejection_limit_db);
        findings.figures.push_back(figure_from(claim, question.frequencies_hz[k], question));
    }
}

void add_curve(Findings& findings, const std::vector<double>& grid, const std::vector<Claim>& claims) {
    Curve curve;
    curve.quantity = "common_mode_rejection";
    curve.x_unit = "Hz";
    curve.y_unit = "dB";
    std::vector<double> bounds;
    for (std::size_t k = 0; k < grid.size(); ++k) {
        curve.x.push_back(grid[k]);
        curve.y.push_back(claims[k].value_db);
        curve.uncertainty.push_back(claims[k].uncertainty_db);
        if (claims[k].bound == Bound::at_least) bounds.push_back(grid[k]);
    }
    // At these frequencies the curve is a lower bound.
    if (!bounds.empty()) curve.conditions.set("at_least_at_hz", bounds);
    findings.curves.push_back(std::move(curve));
}

void measure_sweep(Findings& findings, const CmrrQuestion& question) {
    const std::vector<double> sent_differential = signal::render(*question.differential_stimulus),
                              sent_common = signal::render(*question.common_mode_stimulus);
    TransferQuestion ask;
    ask.recording = question.differential;
    ask.sent = sent_differential;
    ask.rate_hz = question.rate_hz;
    ask.stimulus = question.differential_stimulus;
    const Transfer differential = transfer(ask);
    const std::vector<double> common_samples = without_leakage(question);
    ask.recording = common_samples;
    ask.sent = sent_common;
    ask.stimulus = question.common_mode_stimulus;
    // The residual may be under the noise; then it is where the differential response was.
    Transfer common;
    try {
        common = transfer(ask);
        // A chance peak elsewhere is no residual.
        if (common_samples.size() == question.differential.size() &&
            std::abs(common.delay_frames - differential.delay_frames) > 0.02 * question.rate_hz)
            throw CannotMeasure("elsewhere");
    } catch (const CannotMeasure&) {
        ask.known_delay_frames = differential.delay_frames;
        common = transfer(ask);
        findings.cautions.push_back(
            "the common-mode sweep does not stand out of the noise by itself; it is taken to begin where the "
            "differential one did");
    }
    // Both transfers refer to samples sent; the drives say what those were at the preamp's input.
    const double levels = units::ratio_from_db(question.common_mode_stimulus->level_dbfs -
                                               question.differential_stimulus->level_dbfs);
    const auto claim_at = [&](double hz) {
        const TransferPoint d = differential.at(hz), c = common.at(hz);
        const double scale = drive_ratio(question) * levels / std::abs(d.value);
        return claim_from(unbiased(std::abs(c.value) * scale, c.std * scale), d.std / std::abs(d.value),
                          drive_uncertainty(question), question.rejection_limit_db);
    };
    const double low = std::max(common.low_hz, question.band.low_hz),
                 high = std::min(common.high_hz, question.band.high_hz);
    if (!(high > low))
        throw UsageError(fmt::format("the stimulus spans {:g} to {:g} Hz, outside the band {:g} to {:g} Hz",
                                     common.low_hz, common.high_hz, question.band.low_hz,
                                     question.band.high_hz));
    std::vector<double> wanted = question.frequencies_hz;
    if (wanted.empty())
        for (double hz : {100.0, 1000.0, 10000.0})
            if (hz >= low && hz <= high) wanted.push_back(hz);
    for (double hz : wanted) {
        if (hz < common.low_hz || hz > common.high_hz)
            throw UsageError(fmt::format("{:g} Hz lies outside the stimulus' {:g} to {:g} Hz", hz,
                                         common.low_hz, common.high_hz));
        findings.figures.push_back(figure_from(claim_at(hz), hz, question));
    }
    std::vector<double> grid;
    std::vector<Claim> claims;
    for (double hz : units::logarithmic_grid(low, high, curve_points_per_octave)) {
        grid.push_back(hz);
        claims.push_back(claim_at(hz));
    }
    add_curve(findings, grid, claims);
}

}  // namespace

Findings common_mode_rejection(const CmrrQuestion& question) {
    require_not_silent(question.differential, "the differential recording");
    require_not_silent(question.common_mode, "the common-mode recording");
    require_unclipped(question.differential, "the differential recording");
    require_unclipped(question.common_mode, "the common-mode recording");
    Findings findings;
    findings.kind = "cmrr";
    const bool sweep = question.differential_stimulus && question.common_mode_stimulus &&
                       std::holds_alternative<signal::Sweep>(question.differential_stimulus->kind);
    if (sweep) {
        measure_sweep(findings, question);
        return findings;
    }
    CmrrQuestion tones = question;
    if (tones.frequencies_hz.empty() && question.differential_stimulus)
        tones.frequencies_hz = signal::tone_frequencies_hz(*question.differential_stimulus);
    if (tones.frequencies_hz.empty())
        throw UsageError(
            "which tones were played is unknown: name them (--frequency F) or the stimulus (--stimulus "
            "S.wav)");
    measure_tones(findings, tones);
    if (tones.frequencies_hz.size() > 1) {
        std::vector<double> grid;
        std::vector<Claim> claims;
        for (const Figure& figure : findings.figures) {
            grid.push_back(std::get<double>(*figure.conditions.find("frequency_hz")));
            claims.push_back({figure.value, figure.uncertainty, figure.bound});
        }
        add_curve(findings, grid, claims);
    }
    return findings;
}

}  // namespace coldpin::measure
