#include "coldpin/measure/cmrr.h"

#include <algorithm>
#include <cmath>

#include <fmt/core.h>

#include "coldpin/measure/clipping.h"
#include "coldpin/measure/transfer.h"
#include "coldpin/spectrum/statistics.h"
#include "coldpin/units/error.h"
#include "coldpin/units/frequency_grid.h"
#include "coldpin/units/level.h"

#include "cmrr_tones.h"
#include "rejection_claim.h"

namespace coldpin::measure {

namespace {

constexpr int curve_points_per_octave = 12;
constexpr double elsewhere_s = 0.02;  // two captures of one rig do not differ that much in delay

Transfer differential_transfer(const CmrrQuestion& question) {
    const std::vector<double> sent = signal::render(*question.differential_stimulus);
    TransferQuestion ask;
    ask.recording = question.differential;
    ask.sent = sent;
    ask.rate_hz = question.rate_hz;
    ask.stimulus = question.differential_stimulus;
    return transfer(ask);
}

// The residual may lie under the noise. Then it is where the differential response was, if the recordings
// were captured alike; if not, nobody knows, and the bound would be wrong.
Transfer common_transfer(const CmrrQuestion& question, const Transfer& differential,
                         std::vector<std::string>& cautions) {
    const std::vector<double> sent = signal::render(*question.common_mode_stimulus),
                              samples = without_leakage(question);
    TransferQuestion ask;
    ask.recording = samples;
    ask.sent = sent;
    ask.rate_hz = question.rate_hz;
    ask.stimulus = question.common_mode_stimulus;
    const bool alike = samples.size() == question.differential.size();
    try {
        Transfer common = transfer(ask);
        const double apart_s = std::abs(common.delay_frames - differential.delay_frames) / question.rate_hz;
        // A chance peak elsewhere is no residual.
        if (!alike || apart_s < elsewhere_s) return common;
    } catch (const CannotMeasure&) {
        if (!alike)
            throw CannotMeasure(
                "the common-mode sweep does not stand out of the noise, and the recordings differ in length, "
                "so "
                "that its place is unknown: record both alike, use a longer sweep, or tones (--frequency)");
    }
    ask.known_delay_frames = differential.delay_frames;
    cautions.push_back(
        "the common-mode sweep does not stand out of the noise by itself; it is taken to begin where the "
        "differential one did");
    return transfer(ask);
}

std::vector<double> wanted_frequencies(const CmrrQuestion& question, const Transfer& common, double low_hz,
                                       double high_hz) {
    std::vector<double> wanted = question.frequencies_hz;
    for (double hz : wanted)
        if (!(hz >= common.low_hz) || !(hz <= common.high_hz))
            throw UsageError(fmt::format("{:g} Hz lies outside the stimulus' {:g} to {:g} Hz", hz,
                                         common.low_hz, common.high_hz));
    if (wanted.empty())
        for (double hz : {100.0, 1000.0, 10000.0})
            if (hz >= low_hz && hz <= high_hz) wanted.push_back(hz);
    return wanted;
}

void measure_sweep(Findings& findings, const CmrrQuestion& question) {
    const Transfer differential = differential_transfer(question);
    const Transfer common = common_transfer(question, differential, findings.cautions);
    // Both transfers refer to samples sent; the drives say what those were at the preamp's input.
    const double levels = units::ratio_from_db(question.common_mode_stimulus->level_dbfs -
                                               question.differential_stimulus->level_dbfs);
    const auto claim_at = [&](double hz) {
        const TransferPoint d = differential.at(hz), c = common.at(hz);
        const double size = std::abs(d.value);
        if (!(size > 4.0 * d.std))
            throw CannotMeasure(
                fmt::format("the differential recording holds no clear response at {:g} Hz", hz));
        const double known_db = spectrum::combine(drive_uncertainty_db(question),
                                                  spectrum::amplitude_uncertainty_db(d.std / size));
        return claim_from(Residual{std::abs(c.value), c.std} * (drive_ratio(question) * levels / size),
                          known_db, question.rejection_limit_db);
    };
    const double low = std::max({common.low_hz, differential.low_hz, question.band.low_hz}),
                 high = std::min({common.high_hz, differential.high_hz, question.band.high_hz});
    if (!(high > low))
        throw UsageError(fmt::format("the stimulus spans {:g} to {:g} Hz, outside the band {:g} to {:g} Hz",
                                     common.low_hz, common.high_hz, question.band.low_hz,
                                     question.band.high_hz));
    for (double hz : wanted_frequencies(question, common, low, high))
        add_figure(findings, claim_at(hz), hz, question);
    const std::vector<double> grid = units::logarithmic_grid(low, high, curve_points_per_octave);
    std::vector<Claim> claims;
    claims.reserve(grid.size());
    for (double hz : grid) claims.push_back(claim_at(hz));
    add_curve(findings, grid, claims);
}

void require_usable(const CmrrQuestion& question) {
    require_not_silent(question.differential, "the differential recording");
    require_not_silent(question.common_mode, "the common-mode recording");
    require_unclipped(question.differential, "the differential recording");
    require_unclipped(question.common_mode, "the common-mode recording");
    require_unclipped(question.leakage, "the leakage recording");
}

bool is_sweep(const std::optional<signal::Stimulus>& stimulus) {
    return stimulus && std::holds_alternative<signal::Sweep>(stimulus->kind);
}

}  // namespace

Findings common_mode_rejection(const CmrrQuestion& question) {
    require_usable(question);
    Findings findings;
    findings.kind = "cmrr";
    const bool differential_sweep = is_sweep(question.differential_stimulus),
               common_sweep = is_sweep(question.common_mode_stimulus);
    if (differential_sweep != common_sweep)
        throw UsageError(
            "one recording was driven by a sweep, the other was not: both must have the same kind of "
            "stimulus");
    if (differential_sweep)
        measure_sweep(findings, question);
    else
        measure_tones(findings, question);
    return findings;
}

}  // namespace coldpin::measure
