#include "coldpin/measure/hum.h"

#include <algorithm>
#include <cmath>
#include <numbers>

#include <fmt/core.h>

#include "coldpin/measure/clipping.h"
#include "coldpin/spectrum/mains.h"
#include "coldpin/spectrum/statistics.h"
#include "coldpin/units/error.h"
#include "coldpin/units/level.h"

#include "noise_power.h"

namespace coldpin::measure {

namespace {

bool inside(const Band& band, double hz) {
    return hz >= band.low_hz && hz <= band.high_hz;
}

void require_usable(const HumQuestion& question) {
    const double length_s = static_cast<double>(question.recording.size()) / question.rate_hz;
    if (!(length_s >= 1.0))
        throw UsageError(
            fmt::format("the recording is too short for hum: {:.3f} s; at least 1 s is needed", length_s));
    if (!(question.band.low_hz >= 0.0) || !(question.band.high_hz > question.band.low_hz) ||
        question.band.high_hz > 0.5 * question.rate_hz)
        throw UsageError(fmt::format(
            "the band {:g} to {:g} Hz does not fit a sample rate of {:g} Hz, which ends at {:g} Hz (--band)",
            question.band.low_hz, question.band.high_hz, question.rate_hz, 0.5 * question.rate_hz));
    require_not_silent(question.recording, "the recording");
    require_unclipped(question.recording, "the recording");
}

// RMS sum of harmonics with the variance of its power.
struct HumPower {
    double mean_square = 0.0;
    double variance = 0.0;
};

HumPower hum_power(const spectrum::MainsFit& fit, const Band& band) {
    HumPower power;
    for (const auto& harmonic : fit.harmonics) {
        if (!inside(band, harmonic.number * fit.frequency_hz)) continue;
        if (!harmonic.significant) continue;
        power.mean_square += 0.5 * harmonic.amplitude * harmonic.amplitude;
        const double spread = harmonic.amplitude * harmonic.amplitude_std;  // of amplitude^2 / 2
        power.variance += spread * spread;
    }
    return power;
}

// Hum that an input hears which has no unit on it is the interface's, through its ground or its supply.
struct Beside {
    spectrum::MainsFit fit;
    double amplitude(int number) const {
        const auto found = std::find_if(fit.harmonics.begin(), fit.harmonics.end(),
                                        [&](const auto& one) { return one.number == number; });
        return found != fit.harmonics.end() && found->significant ? found->amplitude : 0.0;
    }
};

Beside hear_beside(const HumQuestion& question, double mains_hz) {
    if (static_cast<double>(question.interface_beside.size()) < 0.5 * question.rate_hz) return {};
    spectrum::MainsSearch search;
    search.near_hz = mains_hz;
    return {spectrum::fit_mains(question.interface_beside, question.rate_hz, search)};
}

constexpr double drowning_share = 0.5;  // of the power: then less than 3 dB are left for the unit
constexpr double noticed_share = 0.1;

Bound bound_beside(double beside_power, double power) {
    return beside_power > drowning_share * power ? Bound::at_most : Bound::exact;
}

Conditions in_band(const HumQuestion& question) {
    return {{"band_hz", std::vector<double>{question.band.low_hz, question.band.high_hz}}};
}

void add_level(Findings& findings, const HumQuestion& question, double mean_square, double statistics_db,
               Bound bound) {
    const double level = question.scale.level_from_sample_rms(std::sqrt(mean_square));
    const double uncertainty_db = spectrum::combine(statistics_db, question.scale.uncertainty_db);
    findings.figures.push_back(
        {"hum_output", level, question.scale.unit(), uncertainty_db, 2.0, bound, in_band(question)});
    if (!question.gain_db || !question.scale.full_scale_dbu) return;
    findings.figures.push_back({"hum_input_referred", level - question.gain_db->value_db, "dBu",
                                spectrum::combine(uncertainty_db, question.gain_db->uncertainty_db), 2.0,
                                bound, in_band(question)});
}

void add_to_noise(Findings& findings, const HumQuestion& question, double mean_square, double statistics_db,
                  const spectrum::BandPower& noise, Bound bound) {
    if (!(noise.mean_square > 0.0)) {
        findings.cautions.push_back("there is no noise in the band to compare the hum with");
        return;
    }
    const double noise_db = spectrum::power_uncertainty_db(std::sqrt(noise.variance) / noise.mean_square);
    findings.figures.push_back({"hum_to_noise", units::db_from_power_ratio(mean_square / noise.mean_square),
                                "dB", spectrum::combine(statistics_db, noise_db), 2.0, bound,
                                in_band(question)});
}

void add_harmonics(Findings& findings, const HumQuestion& question, const spectrum::MainsFit& fit,
                   const Beside& beside) {
    for (const auto& harmonic : fit.harmonics) {
        const double hz = harmonic.number * fit.frequency_hz;
        if (!harmonic.significant || !(harmonic.amplitude > 0.0) || !inside(question.band, hz)) continue;
        const double statistics_db =
            spectrum::amplitude_uncertainty_db(harmonic.amplitude_std / harmonic.amplitude);
        const double heard = beside.amplitude(harmonic.number);
        findings.figures.push_back(
            {"hum_harmonic", question.scale.level_from_sample_rms(harmonic.amplitude / std::numbers::sqrt2),
             question.scale.unit(), spectrum::combine(statistics_db, question.scale.uncertainty_db), 2.0,
             bound_beside(heard * heard, harmonic.amplitude * harmonic.amplitude),
             Conditions{{"harmonic", static_cast<double>(harmonic.number)}, {"frequency_hz", hz}}});
    }
}

void add_frequency(Findings& findings, const spectrum::MainsFit& fit) {
    findings.figures.push_back({"mains_frequency", fit.frequency_hz, "Hz",
                                std::max(2.0 * fit.frequency_std_hz, 1e-6), 2.0, Bound::exact,
                                Conditions{{"drift_hz", fit.drift_hz}}});
    if (std::abs(fit.drift_hz) > 0.2)
        findings.cautions.push_back(
            fmt::format("the mains frequency drifted by {:+.2f} Hz during the recording", fit.drift_hz));
}

// What one line could be at most without standing out: 4.5 standard deviations of its amplitude in a
// Blackman-Harris window over the recording, with the noise of the lowest part of the band.
double hidden_amplitude(const spectrum::AveragedSpectrum& rest) {
    constexpr double low_hz = 30.0, high_hz = 400.0;
    const auto low = spectrum::band_power(rest, low_hz, high_hz, [](double) { return 1.0; });
    const double density = low.mean_square / (high_hz - low_hz);
    return std::max(4.5 * std::sqrt(density * 2.0044 / rest.duration_s), 1e-10);
}

void say_beside(Findings& findings, double beside_power, double power) {
    if (beside_power > drowning_share * power)
        findings.cautions.push_back(
            "an input that hears the interface alone hums nearly as loud: the unit's hum is at most the "
            "value given; look for a ground loop through the interface first (computer on battery, one "
            "outlet strip)");
    else if (beside_power > noticed_share * power)
        findings.cautions.push_back(
            "an input that hears the interface alone hums too, less than 10 dB below: part of this hum may "
            "be the interface's");
}

}  // namespace

Findings hum(const HumQuestion& question) {
    require_usable(question);
    spectrum::MainsSearch search;
    search.near_hz = question.mains_hz;
    const auto fit = spectrum::fit_mains(question.recording, question.rate_hz, search);
    Findings findings;
    findings.kind = "hum";
    std::vector<double> rest(question.recording.begin(), question.recording.end());
    if (fit.found)
        for (std::size_t n = 0; n < rest.size(); ++n) rest[n] -= fit.hum[n];
    const auto rest_spectrum = noise_spectrum(rest, question.rate_hz);
    const auto noise = weighted_power(rest_spectrum, question.band, spectrum::Weighting::none);
    if (fit.found) add_frequency(findings, fit);
    const HumPower power = fit.found ? hum_power(fit, question.band) : HumPower{};
    if (!(power.mean_square > 0.0)) {
        const double hidden = hidden_amplitude(rest_spectrum);
        add_level(findings, question, 0.5 * hidden * hidden, 0.0, Bound::at_most);
        add_to_noise(findings, question, 0.5 * hidden * hidden, 0.0, noise, Bound::at_most);
        findings.cautions.push_back(fmt::format(
            "no mains hum stands out of the noise{}: its level is at most the value given for one line",
            fit.found ? " within the band" : ""));
        return findings;
    }
    const Beside beside = hear_beside(question, fit.frequency_hz);
    const double beside_power = hum_power(beside.fit, question.band).mean_square;
    const Bound bound = bound_beside(beside_power, power.mean_square);
    say_beside(findings, beside_power, power.mean_square);
    const double statistics_db =
        spectrum::power_uncertainty_db(std::sqrt(power.variance) / power.mean_square);
    add_level(findings, question, power.mean_square, statistics_db, bound);
    add_harmonics(findings, question, fit, beside);
    add_to_noise(findings, question, power.mean_square, statistics_db, noise, bound);
    return findings;
}

}  // namespace coldpin::measure
