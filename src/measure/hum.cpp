#include "coldpin/measure/hum.h"

#include <algorithm>
#include <cmath>

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

double input_uncertainty(const HumQuestion& question, double uncertainty_db) {
    return spectrum::combine(uncertainty_db, question.gain_db->uncertainty_db);
}

void require_usable(const HumQuestion& question) {
    const double length_s = static_cast<double>(question.recording.size()) / question.rate_hz;
    if (!(length_s >= 1.0))
        throw UsageError(
            fmt::format("the recording is too short for hum: {:.3f} s; at least 1 s is needed", length_s));
    if (!(question.band.high_hz > question.band.low_hz) || question.band.high_hz > 0.5 * question.rate_hz)
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

double hum_beside(const HumQuestion& question, double mains_hz) {
    spectrum::MainsSearch search;
    search.near_hz = mains_hz;
    const auto fit = spectrum::fit_mains(question.interface_beside, question.rate_hz, search);
    return fit.found ? hum_power(fit, question.band).mean_square : 0.0;
}

}  // namespace

Findings hum(const HumQuestion& question) {
    require_usable(question);
    spectrum::MainsSearch search;
    search.near_hz = question.mains_hz;
    const auto fit = spectrum::fit_mains(question.recording, question.rate_hz, search);
    Findings findings;
    findings.kind = "hum";
    const Conditions in_band = {
        {"band_hz", std::vector<double>{question.band.low_hz, question.band.high_hz}}};
    std::vector<double> rest(question.recording.begin(), question.recording.end());
    const HumPower power = fit.found ? hum_power(fit, question.band) : HumPower{};
    if (power.mean_square > 0.0)
        for (std::size_t n = 0; n < rest.size(); ++n) rest[n] -= fit.hum[n];
    const auto noise_spectrum_rest = noise_spectrum(rest, question.rate_hz);
    const auto noise = weighted_power(noise_spectrum_rest, question.band, spectrum::Weighting::none);

    if (!(power.mean_square > 0.0)) {
        // Nothing stood out: what a line could still be without standing out (4.5 standard deviations of its
        // amplitude in a Blackman-Harris window, noise from the lowest part of the band).
        const double length_s = static_cast<double>(rest.size()) / question.rate_hz;
        const auto low = spectrum::band_power(noise_spectrum_rest, 30.0, 400.0, [](double) { return 1.0; });
        const double amplitude = 4.5 * std::sqrt(low.mean_square / 370.0 * 2.0 / length_s);
        const double level = question.scale.level_from_sample_rms(amplitude / std::sqrt(2.0));
        findings.figures.push_back({"hum_output", level, question.scale.unit(), question.scale.uncertainty_db,
                                    2.0, Bound::at_most, in_band});
        if (question.gain_db && question.scale.full_scale_dbu)
            findings.figures.push_back({"hum_input_referred", level - question.gain_db->value_db, "dBu",
                                        input_uncertainty(question, question.scale.uncertainty_db), 2.0,
                                        Bound::at_most, in_band});
        if (noise.mean_square > 0.0)
            findings.figures.push_back(
                {"hum_to_noise", units::db_from_power_ratio(0.5 * amplitude * amplitude / noise.mean_square),
                 "dB", spectrum::power_uncertainty_db(std::sqrt(noise.variance) / noise.mean_square), 2.0,
                 Bound::at_most, in_band});
        findings.cautions.push_back(
            "no mains hum stands out of the noise: its level is at most the value given for one line");
        return findings;
    }

    // Hum that an input hears which has no unit on it is the interface's, through its ground or its supply.
    const double beside = question.interface_beside.empty() ? 0.0 : hum_beside(question, fit.frequency_hz);
    const bool drowned = beside > 0.5 * power.mean_square;
    const Bound bound = drowned ? Bound::at_most : Bound::exact;
    if (drowned)
        findings.cautions.push_back(
            "an input that hears the interface alone hums nearly as loud: the unit's hum is at most the "
            "value given; look for a ground loop "
            "through the interface first (computer on battery, one outlet strip)");
    else if (beside > 0.1 * power.mean_square)
        findings.cautions.push_back(
            "an input that hears the interface alone hums too, less than 10 dB below: part of this hum may "
            "be the interface's");
    findings.figures.push_back({"mains_frequency", fit.frequency_hz, "Hz",
                                std::max(2.0 * fit.frequency_std_hz, 1e-6), 2.0, Bound::exact,
                                Conditions{{"drift_hz", fit.drift_hz}}});
    const double relative = std::sqrt(power.variance) / power.mean_square;
    const double level = question.scale.level_from_sample_rms(std::sqrt(power.mean_square));
    const double uncertainty_db =
        spectrum::combine(spectrum::power_uncertainty_db(relative), question.scale.uncertainty_db);
    findings.figures.push_back(
        {"hum_output", level, question.scale.unit(), uncertainty_db, 2.0, bound, in_band});
    if (question.gain_db && question.scale.full_scale_dbu)
        findings.figures.push_back({"hum_input_referred", level - question.gain_db->value_db, "dBu",
                                    input_uncertainty(question, uncertainty_db), 2.0, bound, in_band});
    for (const auto& harmonic : fit.harmonics) {
        const double hz = harmonic.number * fit.frequency_hz;
        if (!harmonic.significant || !(harmonic.amplitude > 0.0) || !inside(question.band, hz)) continue;
        const double statistics_db =
            spectrum::amplitude_uncertainty_db(harmonic.amplitude_std / harmonic.amplitude);
        findings.figures.push_back(
            {"hum_harmonic", question.scale.level_from_sample_rms(harmonic.amplitude / std::sqrt(2.0)),
             question.scale.unit(), spectrum::combine(statistics_db, question.scale.uncertainty_db), 2.0,
             Bound::exact,
             Conditions{{"harmonic", static_cast<double>(harmonic.number)}, {"frequency_hz", hz}}});
    }
    if (noise.mean_square > 0.0)
        findings.figures.push_back(
            {"hum_to_noise", units::db_from_power_ratio(power.mean_square / noise.mean_square), "dB",
             spectrum::combine(spectrum::power_uncertainty_db(relative),
                               spectrum::power_uncertainty_db(std::sqrt(noise.variance) / noise.mean_square)),
             2.0, Bound::exact, in_band});
    if (std::abs(fit.drift_hz) > 0.2)
        findings.cautions.push_back(
            fmt::format("the mains frequency drifted by {:+.2f} Hz during the recording", fit.drift_hz));
    return findings;
}

}  // namespace coldpin::measure
