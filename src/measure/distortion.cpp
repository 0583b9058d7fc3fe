#include "coldpin/measure/distortion.h"

#include <algorithm>
#include <cmath>
#include <numbers>
#include <vector>

#include <fmt/core.h>

#include "coldpin/measure/clipping.h"
#include "coldpin/spectrum/phasor_sum.h"
#include "coldpin/spectrum/statistics.h"
#include "coldpin/units/error.h"
#include "coldpin/units/level.h"

#include "noise_power.h"
#include "tone_fit.h"
#include "tone_level.h"

namespace coldpin::measure {

namespace {

constexpr double converters_own_db = -80.0;
constexpr double standing_out = 3.0;  // standard deviations, or it is a bound

// A power with its variance, from an amplitude that noise makes uncertain: the noise's share is taken off.
struct Power {
    double mean_square = 0.0;
    double variance = 0.0;
};
Power harmonic_power(double amplitude, double std) {
    const double squared = amplitude * amplitude, noise = std * std;
    // Both components of the phasor carry the noise.
    return {0.5 * std::max(0.0, squared - 2.0 * noise), 0.25 * (4.0 * squared * noise + 4.0 * noise * noise)};
}

struct Ratio {
    double value = 0.0;
    double uncertainty = 0.0;
    Bound bound = Bound::exact;
};
// The square root of one power over another's; the second is known far better than the first.
Ratio amplitude_ratio(const Power& part, double whole_mean_square) {
    const double std = std::sqrt(part.variance);
    if (part.mean_square > standing_out * std) {
        const double value = std::sqrt(part.mean_square / whole_mean_square);
        return {value, value * std / part.mean_square, Bound::exact};  // k = 2 of half the relative deviation
    }
    return {std::sqrt((part.mean_square + 2.0 * std) / whole_mean_square), 0.0, Bound::at_most};
}

}  // namespace

Findings distortion(const DistortionQuestion& question) {
    require_not_silent(question.recording, "the recording");
    require_unclipped(question.recording, "the recording");
    Findings findings;
    findings.kind = "distortion";
    const ToneLevel tone =
        tone_level(question.recording, question.rate_hz, question.frequency_hz, findings.cautions);
    // That caution of gain() is this method's subject.
    findings.cautions.erase(
        std::remove_if(findings.cautions.begin(), findings.cautions.end(),
                       [](const auto& one) { return one.find("distorted") != std::string::npos; }),
        findings.cautions.end());
    const auto stretch = question.recording.subspan(tone.begin, tone.end - tone.begin);
    const double top_hz = std::min(question.band.high_hz, 0.495 * question.rate_hz);
    std::vector<double> tones_hz;
    for (int number = 1; number <= question.highest_harmonic && number * tone.frequency_hz <= top_hz;
         ++number)
        tones_hz.push_back(number * tone.frequency_hz);
    const ToneFit fit = fit_tones(stretch, question.rate_hz, tones_hz);
    const double fundamental = std::abs(fit.phasors.front()),
                 fundamental_ms = 0.5 * fundamental * fundamental;

    const Conditions at = {{"frequency_hz", question.frequency_hz}};
    const double level_std = fit.std.front() / fundamental;
    findings.figures.push_back(
        {"output_level", question.scale.level_from_sample_rms(fundamental / std::numbers::sqrt2),
         question.scale.unit(),
         spectrum::combine(spectrum::amplitude_uncertainty_db(level_std), question.scale.uncertainty_db), 2.0,
         Bound::exact, at});
    Power harmonics;
    for (std::size_t k = 1; k < tones_hz.size(); ++k) {
        const double amplitude = std::abs(fit.phasors[k]), std = fit.std[k];
        const Power power = harmonic_power(amplitude, std);
        harmonics.mean_square += power.mean_square;
        harmonics.variance += power.variance;
        const Ratio ratio = amplitude_ratio(power, fundamental_ms);
        Conditions conditions = at;
        conditions.set("harmonic", static_cast<double>(k + 1));
        findings.figures.push_back({"harmonic", units::db_from_ratio(std::max(ratio.value, 1e-15)), "dB",
                                    ratio.bound == Bound::exact ? spectrum::amplitude_uncertainty_db(
                                                                      0.5 * ratio.uncertainty / ratio.value)
                                                                : 0.0,
                                    2.0, ratio.bound, conditions});
    }
    if (tones_hz.size() > 1) {
        const Ratio thd = amplitude_ratio(harmonics, fundamental_ms);
        Conditions conditions = at;
        conditions.set("highest_harmonic", static_cast<double>(tones_hz.size()));
        findings.figures.push_back(
            {"thd", 100.0 * thd.value, "%", 100.0 * thd.uncertainty, 2.0, thd.bound, conditions});
        if (units::db_from_ratio(thd.value + 1e-15) < converters_own_db)
            findings.cautions.push_back(
                "distortion this low may be the converters' own, which adds to the unit's or cancels it: "
                "compare with a "
                "loop at the same levels");
    } else {
        findings.cautions.push_back(fmt::format(
            "no harmonic of {:g} Hz lies within the band: there is no harmonic distortion to measure",
            question.frequency_hz));
    }

    // Everything else: noise and hum as spectra, the harmonics as fitted.
    std::vector<double> rest(stretch.begin(), stretch.end());
    for (std::size_t k = 0; k < tones_hz.size(); ++k)
        spectrum::add_sine(rest, -fit.phasors[k], 2.0 * std::numbers::pi * tones_hz[k] / question.rate_hz);
    const auto noise = weighted_power(noise_spectrum(rest, question.rate_hz), {question.band.low_hz, top_hz},
                                      spectrum::Weighting::none);
    const Power residual = {harmonics.mean_square + noise.mean_square, harmonics.variance + noise.variance};
    const double whole = fundamental_ms + residual.mean_square;
    const double ratio = std::sqrt(residual.mean_square / whole);
    const double relative_std = 0.5 * std::sqrt(residual.variance) / residual.mean_square;
    Conditions conditions = at;
    conditions.set("band_hz", std::vector<double>{question.band.low_hz, top_hz});
    findings.figures.push_back(
        {"thd_n", 100.0 * ratio, "%", 200.0 * ratio * relative_std, 2.0, Bound::exact, conditions});
    findings.figures.push_back({"sinad", -units::db_from_ratio(ratio), "dB",
                                spectrum::amplitude_uncertainty_db(relative_std), 2.0, Bound::exact,
                                conditions});
    return findings;
}

}  // namespace coldpin::measure
