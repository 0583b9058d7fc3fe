#include "coldpin/measure/noise.h"

#include <algorithm>
#include <cmath>
#include <future>
#include <optional>

#include <fmt/core.h>

#include "coldpin/measure/clipping.h"
#include "coldpin/spectrum/averaged_spectrum.h"
#include "coldpin/spectrum/quasi_peak.h"
#include "coldpin/spectrum/statistics.h"
#include "coldpin/spectrum/weighting.h"
#include "coldpin/units/error.h"
#include "coldpin/units/level.h"
#include "coldpin/units/physics.h"

#include "noise_power.h"
#include "steadiness.h"

namespace coldpin::measure {

namespace {

using spectrum::Weighting;

constexpr double least_excess_db = 3.0;  // over the interface: below, a difference of powers means nothing
constexpr double nothing = 1e-24;        // mean square: -237 dBFS, the rounding of double arithmetic

// The power that is the unit's own, with its relative standard deviation, or a bound when the interface
// drowns it.
struct OwnPower {
    double mean_square = 0.0;
    double relative_std = 0.0;
    Bound bound = Bound::exact;
};

OwnPower own_power(const spectrum::BandPower& whole, const spectrum::BandPower* interface) {
    OwnPower own{whole.mean_square, std::sqrt(whole.variance) / whole.mean_square, Bound::exact};
    if (interface == nullptr) return own;
    const double excess_db = units::db_from_power_ratio(whole.mean_square / interface->mean_square);
    if (excess_db < least_excess_db) {
        own.bound = Bound::at_most;
        return own;
    }
    own.mean_square = whole.mean_square - interface->mean_square;
    own.relative_std = std::sqrt(whole.variance + interface->variance) / own.mean_square;
    return own;
}

Conditions conditions_for(const NoiseQuestion& question, Weighting weighting, bool subtracted) {
    Conditions conditions = {{"weighting", std::string(spectrum::weighting_name(weighting))},
                             {"detector", std::string("rms")},
                             {"band_hz", std::vector<double>{question.band.low_hz, question.band.high_hz}},
                             {"interface_noise_subtracted", subtracted}};
    return conditions;
}

double thermal_level_dbu(const NoiseQuestion& question, Weighting weighting, double temperature_k) {
    // Integrated over the same band with the same weighting, in steps far finer than any weighting bends.
    constexpr int steps = 4000;
    double sum = 0.0;
    const double width = (question.band.high_hz - question.band.low_hz) / steps;
    for (int i = 0; i < steps; ++i) {
        const double w = spectrum::weighting_gain(weighting, question.band.low_hz + (i + 0.5) * width);
        sum += w * w * width;
    }
    const double density = units::thermal_noise_density_v(*question.source_ohms, temperature_k);
    return units::dbu_from_volts_rms(density * std::sqrt(sum));
}

void require_possible(const NoiseQuestion& question, double input_dbu, double uncertainty_db) {
    const double thermal_dbu =
        thermal_level_dbu(question, Weighting::none, units::celsius_zero_k + question.temperature_c);
    if (input_dbu + uncertainty_db >= thermal_dbu) return;
    throw CannotMeasure(fmt::format(
        "noise at the input comes out at {:.1f} dBu, below the {:.1f} dBu thermal noise of {:g} "
        "ohm: physically impossible.\n"
        "Likely causes: input full scale or gain is wrong (dBFS taken for dBu, a knob moved), the "
        "input is not terminated with {:g} ohm, or the unit passes less than the band (--band).",
        input_dbu, thermal_dbu, *question.source_ohms, *question.source_ohms));
}

void require_usable(const NoiseQuestion& question) {
    const double length_s = static_cast<double>(question.recording.size()) / question.rate_hz;
    if (!(length_s >= 0.25))
        throw UsageError(fmt::format(
            "the recording is too short for noise: {:.3f} s; at least 0.25 s are needed", length_s));
    if (!(question.band.low_hz >= 0.0) || !(question.band.high_hz > question.band.low_hz) ||
        question.band.high_hz > 0.5 * question.rate_hz)
        throw UsageError(fmt::format(
            "the band {:g} to {:g} Hz does not fit a sample rate of {:g} Hz, which ends at {:g} Hz (--band)",
            question.band.low_hz, question.band.high_hz, question.rate_hz, 0.5 * question.rate_hz));
    if (question.source_ohms && !(*question.source_ohms > 0.0))
        throw UsageError(fmt::format("a source of {:g} ohm cannot be: it must be above 0 (--source-ohms)",
                                     *question.source_ohms));
    if (!(question.temperature_c > -units::celsius_zero_k))
        throw UsageError(
            fmt::format("a source at {:g} degC cannot be (--temperature-c)", question.temperature_c));
    require_not_silent(question.recording, "the recording");
    require_unclipped(question.recording, "the recording");
    if (question.interface_idle.empty()) return;
    require_not_silent(question.interface_idle, "the recording of the interface alone");
    require_unclipped(question.interface_idle, "the recording of the interface alone");
}

Curve density_curve(const NoiseQuestion& question, const spectrum::AveragedSpectrum& spectrum) {
    Curve curve;
    curve.quantity = "noise_density";
    curve.x_unit = "Hz";
    curve.y_unit = question.scale.full_scale_dbu ? "V/sqrt(Hz)" : "FS/sqrt(Hz)";
    curve.conditions = {{"resolution_hz", spectrum.noise_bandwidth_hz}};
    const double volts = question.scale.volts_per_sample_unit();
    // Below 1 kHz every bin; above, a 96th of an octave at a time, or the file would hold nothing else.
    std::size_t k =
        std::max<std::size_t>(1, static_cast<std::size_t>(std::ceil(question.band.low_hz / spectrum.bin_hz)));
    const auto last = std::min(spectrum.density.size() - 1,
                               static_cast<std::size_t>(question.band.high_hz / spectrum.bin_hz));
    while (k <= last) {
        const auto wide = static_cast<std::size_t>(static_cast<double>(k) * 0.00724);
        const std::size_t end = std::min(last + 1, k + std::max<std::size_t>(1, wide));
        double sum = 0.0;
        for (std::size_t j = k; j < end; ++j) sum += spectrum.density[j];
        const auto bins = static_cast<double>(end - k);
        // Neighbouring bins share the window's bandwidth, so they count for less than their number.
        const double freedom =
            spectrum.degrees_of_freedom * std::max(1.0, bins * spectrum.bin_hz / spectrum.noise_bandwidth_hz);
        const double density = std::sqrt(sum / bins) * volts;
        curve.x.push_back(0.5 * static_cast<double>(k + end - 1) * spectrum.bin_hz);
        curve.y.push_back(density);
        curve.uncertainty.push_back(
            density * std::hypot(1.0 / std::sqrt(0.5 * freedom),
                                 question.scale.uncertainty_db / units::db_per_relative_amplitude));
        k = end;
    }
    return curve;
}

struct Spectra {
    spectrum::AveragedSpectrum whole;
    std::optional<spectrum::AveragedSpectrum> idle, beside;
    double steadiness_std = 0.0;  // relative, of the power; 0 when the noise is steady
};

Spectra spectra_of(const NoiseQuestion& question, std::vector<std::string>& cautions) {
    Spectra spectra;
    spectra.whole = noise_spectrum(question.recording, question.rate_hz);
    if (!question.interface_idle.empty())
        spectra.idle = noise_spectrum(question.interface_idle, question.rate_hz);
    else if (!question.interface_beside.empty())
        spectra.beside = noise_spectrum(question.interface_beside, question.rate_hz);
    const auto power = weighted_power(spectra.whole, question.band, Weighting::none);
    if (!(power.mean_square > nothing))
        throw CannotMeasure("the recording holds nothing within the band: is the right input recorded?");
    const auto steadiness = noise_steadiness(question.recording, question.rate_hz, question.band,
                                             std::sqrt(power.variance) / power.mean_square);
    if (!steadiness.steady) {
        spectra.steadiness_std = steadiness.relative_std;
        cautions.push_back(fmt::format(
            "the noise is not steady: parts of the recording differ by {:.2g} dB, more than chance "
            "allows (crackle, a bad contact, something switching); the uncertainty counts that",
            steadiness.spread_db));
    }
    return spectra;
}

OwnPower own_power_of(const NoiseQuestion& question, const Spectra& spectra, Weighting weighting,
                      double& least_excess_beside_db) {
    const auto whole = weighted_power(spectra.whole, question.band, weighting);
    const auto alone =
        spectra.idle ? weighted_power(*spectra.idle, question.band, weighting) : spectrum::BandPower{};
    OwnPower own = own_power(whole, spectra.idle ? &alone : nullptr);
    own.relative_std = std::max(own.relative_std, spectra.steadiness_std);
    if (spectra.beside) {
        const double beside = weighted_power(*spectra.beside, question.band, weighting).mean_square;
        const double excess_db = units::db_from_power_ratio(whole.mean_square / std::max(beside, nothing));
        least_excess_beside_db = std::min(least_excess_beside_db, excess_db);
        if (excess_db < least_excess_db) own.bound = Bound::at_most;
    }
    return own;
}

void add_levels(Findings& findings, const NoiseQuestion& question, Weighting weighting, const OwnPower& own) {
    const double level = question.scale.level_from_sample_rms(std::sqrt(own.mean_square));
    const double uncertainty_db =
        spectrum::combine(spectrum::power_uncertainty_db(own.relative_std), question.scale.uncertainty_db);
    Conditions conditions =
        conditions_for(question, weighting, !question.interface_idle.empty() && own.bound == Bound::exact);
    findings.figures.push_back(
        {"noise_output", level, question.scale.unit(), uncertainty_db, 2.0, own.bound, conditions});
    if (!question.gain_db || !question.scale.full_scale_dbu) return;
    const double input = level - question.gain_db->value_db;
    const double input_uncertainty_db = spectrum::combine(uncertainty_db, question.gain_db->uncertainty_db);
    conditions.set("gain_db", question.gain_db->value_db);
    if (question.source_ohms) conditions.set("source_ohms", *question.source_ohms);
    if (question.source_ohms && weighting == Weighting::none)
        require_possible(question, input, input_uncertainty_db);
    findings.figures.push_back(
        {"noise_input_referred", input, "dBu", input_uncertainty_db, 2.0, own.bound, conditions});
}

// The quasi-peak reading takes as long as everything else: it runs beside it. Absent for recordings that are
// too short or too slow for it.
std::optional<std::future<spectrum::QuasiPeakReading>> quasi_peak_beside(const NoiseQuestion& question) {
    constexpr double shortest_s = 1.0, least_rate_hz = 32000.0;
    const double length_s = static_cast<double>(question.recording.size()) / question.rate_hz;
    if (length_s < shortest_s || question.rate_hz < least_rate_hz) return std::nullopt;
    return std::async(std::launch::async, [&question] {
        return spectrum::quasi_peak_468(question.recording, question.rate_hz, question.band.low_hz,
                                        question.band.high_hz);
    });
}

// Highest reading in the recording. The interface's share cannot be taken off a peak: where it matters, it is
// a bound.
void add_quasi_peak(Findings& findings, const NoiseQuestion& question,
                    const spectrum::QuasiPeakReading& quasi_peak, Bound bound) {
    constexpr double settled_s = 0.7;
    if (!(quasi_peak.highest > 0.0)) return;
    // How far readings scatter once the detector is charged says how far another recording's highest would
    // be.
    double sum = 0.0, squares = 0.0, count = 0.0;
    for (std::size_t k = static_cast<std::size_t>(settled_s / 0.1); k < quasi_peak.readings.size(); ++k) {
        const double db = units::db_from_ratio(quasi_peak.readings[k]);
        sum += db;
        squares += db * db;
        count += 1.0;
    }
    const double scatter_db =
        count > 1.0 ? std::sqrt(std::max(0.0, squares / count - sum * sum / count / count)) : 0.5;
    const double uncertainty_db =
        spectrum::combine(std::max(0.1, 2.0 * scatter_db), question.scale.uncertainty_db);
    Conditions conditions = conditions_for(question, Weighting::itu468, false);
    conditions.set("detector", std::string("quasi-peak"));
    const double level = question.scale.level_from_sample_rms(quasi_peak.highest);
    findings.figures.push_back(
        {"noise_output", level, question.scale.unit(), uncertainty_db, 2.0, bound, conditions});
    if (!question.gain_db || !question.scale.full_scale_dbu) return;
    conditions.set("gain_db", question.gain_db->value_db);
    if (question.source_ohms) conditions.set("source_ohms", *question.source_ohms);
    findings.figures.push_back({"noise_input_referred", level - question.gain_db->value_db, "dBu",
                                spectrum::combine(uncertainty_db, question.gain_db->uncertainty_db), 2.0,
                                bound, conditions});
}

// The source's own share is brought from its temperature to the 290 K that the noise figure refers to.
void add_noise_figure(Findings& findings, const NoiseQuestion& question) {
    const Figure* input = findings.figure("noise_input_referred", {{"weighting", std::string("none")}});
    if (!question.source_ohms || input == nullptr) return;
    const double reference = units::power_ratio_from_db(
        thermal_level_dbu(question, Weighting::none, units::noise_reference_temperature_k));
    const double source =
        reference * (units::celsius_zero_k + question.temperature_c) / units::noise_reference_temperature_k;
    const double whole = units::power_ratio_from_db(input->value), power = whole - source + reference;
    if (!(power > 0.0)) {
        findings.cautions.push_back(
            "the noise figure is left out: at this temperature the source alone makes more noise than 290 K "
            "allow to refer to");
        return;
    }
    findings.figures.push_back(
        {"noise_figure", units::db_from_power_ratio(power / reference), "dB",
         input->uncertainty * whole / power, 2.0, input->bound,
         Conditions{{"source_ohms", *question.source_ohms},
                    {"temperature_c", question.temperature_c},
                    {"band_hz", std::vector<double>{question.band.low_hz, question.band.high_hz}}}});
}

void say_interface(Findings& findings, double least_excess_beside_db) {
    const bool drowned = std::any_of(findings.figures.begin(), findings.figures.end(),
                                     [](const Figure& figure) { return figure.bound != Bound::exact; });
    if (drowned)
        findings.cautions.push_back(
            "the interface's own noise is less than 3 dB below what was recorded: the unit's noise is at "
            "most the value given; raise its gain, or use a quieter input");
    else if (least_excess_beside_db < 10.0)
        findings.cautions.push_back(fmt::format(
            "an input that hears the interface alone is only {:.1f} dB quieter: up to {:.1f} dB of this "
            "noise may be the interface's",
            least_excess_beside_db,
            -units::db_from_power_ratio(1.0 - units::power_ratio_from_db(-least_excess_beside_db))));
}

void say_missing(Findings& findings, const NoiseQuestion& question) {
    if (question.gain_db && !question.scale.full_scale_dbu)
        findings.cautions.push_back(
            "noise at the input needs volts: without --input-full-scale-dbu only the level in dBFS is known");
    if (question.source_ohms && !question.gain_db)
        findings.cautions.push_back("the noise figure needs the gain (--gain-db)");
}

}  // namespace

Findings noise(const NoiseQuestion& question) {
    require_usable(question);
    Findings findings;
    findings.kind = "noise";
    auto quasi_peak = quasi_peak_beside(question);
    const Spectra spectra = spectra_of(question, findings.cautions);
    double least_excess_beside_db = 1e9;
    for (Weighting weighting : {Weighting::none, Weighting::a, Weighting::c, Weighting::itu468})
        add_levels(findings, question, weighting,
                   own_power_of(question, spectra, weighting, least_excess_beside_db));
    const Figure* weighted = findings.figure("noise_output", {{"weighting", std::string("468")}});
    if (quasi_peak)
        add_quasi_peak(findings, question, quasi_peak->get(),
                       weighted != nullptr ? weighted->bound : Bound::exact);
    add_noise_figure(findings, question);
    findings.curves.push_back(density_curve(question, spectra.whole));
    say_interface(findings, least_excess_beside_db);
    say_missing(findings, question);
    describe_lines(spectra.whole, question.band, findings.cautions);
    return findings;
}

}  // namespace coldpin::measure
