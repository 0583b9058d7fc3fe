#include "cmrr_tones.h"

#include <algorithm>
#include <cmath>

#include <fmt/core.h>

#include "coldpin/spectrum/statistics.h"
#include "coldpin/spectrum/tone_extent.h"
#include "coldpin/units/error.h"
#include "coldpin/units/level.h"

#include "rejection_claim.h"
#include "steady_tone.h"
#include "tone_fit.h"
#include "tone_level.h"

namespace coldpin::measure {

namespace {

// From this confidence (an amplitude of 20 standard deviations) a tone shows where it begins and ends to a
// few per cent of its length, which is then less than its uncertainty.
constexpr double clearly_heard = 200.0;
// What an output's level may change between two captures (common practice: 0.01 dB).
constexpr double repeatability = 0.001;

std::vector<double> stimulus_tones(const std::optional<signal::Stimulus>& stimulus) {
    return stimulus ? signal::tone_frequencies_hz(*stimulus) : std::vector<double>{};
}

// Every tone that was played is fitted, whichever are asked for: one left out would disturb its neighbours.
std::vector<double> all_tones(const CmrrQuestion& question, const std::vector<double>& asked) {
    std::vector<double> tones = asked;
    for (const auto* stimulus : {&question.differential_stimulus, &question.common_mode_stimulus})
        for (double hz : stimulus_tones(*stimulus))
            if (std::none_of(tones.begin(), tones.end(),
                             [&](double other) { return std::abs(other - hz) < 1e-6 * hz; }))
                tones.push_back(hz);
    return tones;
}

std::vector<double> asked_tones(const CmrrQuestion& question) {
    std::vector<double> asked = question.frequencies_hz;
    if (asked.empty()) asked = stimulus_tones(question.differential_stimulus);
    if (asked.empty())
        throw UsageError(
            "which tones were played is unknown: name them (--frequency F) or the stimulus (--stimulus "
            "S.wav)");
    for (std::size_t k = 0; k < asked.size(); ++k) {
        if (!(asked[k] > 0.0) || !(asked[k] < 0.5 * question.rate_hz))
            throw UsageError(
                fmt::format("a tone at {:g} Hz cannot be in a recording at {:g} Hz (--frequency)", asked[k],
                            question.rate_hz));
        if (std::find(asked.begin(), asked.begin() + static_cast<std::ptrdiff_t>(k), asked[k]) !=
            asked.begin() + static_cast<std::ptrdiff_t>(k))
            throw UsageError(fmt::format("the frequency {:g} Hz is named twice (--frequency)", asked[k]));
    }
    return asked;
}

// How much faster the input's clock sees the output's tones; 1 for one clock. The lowest tone says it
// roughly, each higher one more finely.
double clock_ratio(std::span<const double> stretch, double rate_hz, const ToneLevel& first, double first_hz,
                   std::vector<double> tones) {
    double ratio = first.frequency_hz / first_hz;
    std::sort(tones.begin(), tones.end());
    for (double hz : tones) {
        if (hz <= first_hz) continue;
        const SteadyTone tone = follow_tone(stretch, rate_hz, hz * ratio);
        const double off_hz = tone.frequency_hz - hz * ratio;
        const bool significant = std::abs(off_hz) > std::max(6.0 * tone.frequency_std_hz, 1e-7 * hz);
        if (significant && tone.coherence > 0.9 && std::abs(off_hz) < 1e-4 * hz)
            ratio = tone.frequency_hz / hz;
    }
    return ratio;
}

// Where the common-mode tones sound, and which part of that stretch they fill: all of it when they are heard
// clearly. Otherwise they lie somewhere in the whole recording and last as long as they did in the
// differential one; synchronous detection over all of it then finds their amplitude times that part.
struct Stretch {
    std::size_t begin = 0;
    std::size_t end = 0;
    double filled = 1.0;
};

Stretch common_mode_stretch(std::span<const double> samples, const CmrrQuestion& question,
                            const std::vector<double>& tones_hz, const ToneLevel& differential,
                            std::vector<std::string>& cautions) {
    spectrum::Extent best;
    for (double hz : tones_hz) {
        const auto found = spectrum::find_tone(samples, question.rate_hz, hz);
        if (found.found && found.confidence > std::max(clearly_heard, best.confidence)) best = found;
    }
    if (best.found) return {best.begin, best.end, 1.0};
    double length_s = differential.sounding_s;
    const auto& stimulus = question.common_mode_stimulus;
    if (stimulus) length_s = stimulus->length_s - stimulus->fade_s;  // half of each fade counts
    cautions.push_back(fmt::format(
        "the common-mode tone is not clearly heard: it is taken to lie within the recording and to "
        "last {:.2f} s{}",
        length_s, stimulus ? "" : ", as the differential one does"));
    return {0, samples.size(),
            std::min(1.0, length_s * question.rate_hz / static_cast<double>(samples.size()))};
}

// A tone on a mains harmonic measures hum: the hum there is not known apart, so say so.
void warn_of_hum(double mains_hz, double length_s, const std::vector<double>& tones_hz,
                 std::vector<std::string>& cautions) {
    if (!(mains_hz > 0.0)) return;
    for (double hz : tones_hz) {
        const double number = std::round(hz / mains_hz);
        if (number >= 1.0 && std::abs(hz - number * mains_hz) < 1.5 / length_s)
            cautions.push_back(
                fmt::format("the tone at {:g} Hz lies on harmonic {:g} of the mains: hum counts as lack of "
                            "rejection there; move it between the harmonics",
                            hz, number));
    }
}

// The leakage that was subtracted, per tone: 0 without one.
std::vector<double> leakage_amplitudes(const CmrrQuestion& question, const Stretch& where,
                                       const std::vector<double>& tones_hz) {
    std::vector<double> amplitudes(tones_hz.size(), 0.0);
    if (question.leakage.empty()) return amplitudes;
    const auto stretch = question.leakage.subspan(where.begin, where.end - where.begin);
    for (std::size_t k = 0; k < tones_hz.size(); ++k)
        amplitudes[k] = std::abs(hann_weighted_sine(stretch, question.rate_hz, tones_hz[k]));
    return amplitudes;
}

// The drives are those of the whole stimulus; each of N tones has a share of 1/N of its power.
double share_ratio(const CmrrQuestion& question) {
    const double differential = static_cast<double>(stimulus_tones(question.differential_stimulus).size()),
                 common = static_cast<double>(stimulus_tones(question.common_mode_stimulus).size());
    return differential > 0.0 && common > 0.0 ? std::sqrt(common / differential) : 1.0;
}

std::vector<double> times(std::vector<double> values, double factor) {
    for (double& value : values) value *= factor;
    return values;
}

void say_leakage(double leaked, const Residual& residual, double hz, std::vector<std::string>& cautions) {
    if (leaked > 10.0 * residual.amplitude() && residual.stands_out())
        cautions.push_back(
            fmt::format("at {:g} Hz the leakage inside the interface is {:.0f} dB above what is left after "
                        "subtracting it: any change between the two captures counts as lack of rejection",
                        hz, units::db_from_ratio(leaked / residual.amplitude())));
}

}  // namespace

void measure_tones(Findings& findings, const CmrrQuestion& question) {
    const std::vector<double> asked = asked_tones(question), played = all_tones(question, asked);
    const double first_hz = *std::min_element(asked.begin(), asked.end());
    // The differential tone must be there: this refuses in words when not.
    const ToneLevel first = tone_level(question.differential, question.rate_hz, first_hz, findings.cautions);
    const auto sent = question.differential.subspan(first.begin, first.end - first.begin);
    const double ratio = clock_ratio(sent, question.rate_hz, first, first_hz, played);
    const std::vector<double> tones_hz = times(played, ratio);
    const ToneFit differential = fit_tones(sent, question.rate_hz, tones_hz);

    const std::vector<double> samples = without_leakage(question);
    const Stretch where = common_mode_stretch(samples, question, tones_hz, first, findings.cautions);
    const auto stretch = std::span(samples).subspan(where.begin, where.end - where.begin);
    const ToneFit common = fit_tones(stretch, question.rate_hz, tones_hz);
    const std::vector<double> leaked = leakage_amplitudes(question, where, tones_hz);
    warn_of_hum(common.mains_hz, static_cast<double>(stretch.size()) / question.rate_hz, times(asked, ratio),
                findings.cautions);
    std::vector<Claim> claims;
    for (std::size_t k = 0; k < asked.size(); ++k) {
        const double size = std::abs(differential.phasors[k]);
        if (!(size > 8.0 * differential.std[k]))
            throw CannotMeasure(
                fmt::format("the differential recording holds no clear tone at {:g} Hz", asked[k]));
        const Residual seen{std::abs(common.phasors[k]) / where.filled,
                            std::hypot(common.std[k] / where.filled, repeatability * leaked[k])};
        say_leakage(leaked[k], seen, asked[k], findings.cautions);
        const double known_db = spectrum::combine(
            drive_uncertainty_db(question), spectrum::amplitude_uncertainty_db(differential.std[k] / size));
        claims.push_back(claim_from(seen * (drive_ratio(question) * share_ratio(question) / size), known_db,
                                    question.rejection_limit_db));
        add_figure(findings, claims.back(), asked[k], question);
    }
    if (asked.size() > 1) add_curve(findings, asked, claims);
}

}  // namespace coldpin::measure
