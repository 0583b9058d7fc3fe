#include "coldpin/measure/noise.h"

#include <algorithm>
#include <cmath>

#include <fmt/core.h>

#include "coldpin/measure/clipping.h"
#include "coldpin/spectrum/averaged_spectrum.h"
#include "coldpin/spectrum/statistics.h"
#include "coldpin/spectrum/weighting.h"
#include "coldpin/units/error.h"
#include "coldpin/units/level.h"
#include "coldpin/units/physics.h"

#include "noise_power.h"

namespace coldpin::measure {

namespace {

using spectrum::Weighting;

constexpr double least_excess_db = 3.0;  // over the interface: below, a difference of powers means nothing

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
    throw CannotMeasure(
        fmt::format("noise at the input comes out at {:.1f} dBu, below the {:.1f} dBu thermal noise of {:g} "
                    "ohm: physically impossible.\n"
                    "Likely causes: input full scale or gain is wrong (dBFS taken for dBu, a knob moved), or "
                    "the input is not terminated with {:g} ohm.",
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
    require_not_silent(question.recording, "the recording");
    require_unclipped(question.recording, "the recording");
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

}  // namespace

Findings noise(const NoiseQuestion& question) {
    require_usable(question);
    const auto spectrum = noise_spectrum(question.recording, question.rate_hz);
    std::optional<spectrum::AveragedSpectrum> idle;
    if (!question.interface_idle.empty()) {
        require_not_silent(question.interface_idle, "the recording of the interface alone");
        idle = noise_spectrum(question.interface_idle, question.rate_hz);
    }
    std::optional<spectrum::AveragedSpectrum> beside;
    if (!idle && !question.interface_beside.empty())
        beside = noise_spectrum(question.interface_beside, question.rate_hz);
    Findings findings;
    findings.kind = "noise";
    bool drowned = false;
    double least_excess_beside_db = 1e9;
    for (Weighting weighting : {Weighting::none, Weighting::a, Weighting::c, Weighting::itu468}) {
        const auto whole = weighted_power(spectrum, question.band, weighting);
        const auto alone = idle ? weighted_power(*idle, question.band, weighting) : spectrum::BandPower{};
        OwnPower own = own_power(whole, idle ? &alone : nullptr);
        if (beside) {
            const double excess_db = units::db_from_power_ratio(
                whole.mean_square / weighted_power(*beside, question.band, weighting).mean_square);
            least_excess_beside_db = std::min(least_excess_beside_db, excess_db);
            if (excess_db < least_excess_db) own.bound = Bound::at_most;
        }
        drowned = drowned || own.bound != Bound::exact;
        const double level = question.scale.level_from_sample_rms(std::sqrt(own.mean_square));
        const double uncertainty_db = spectrum::combine(spectrum::power_uncertainty_db(own.relative_std),
                                                        question.scale.uncertainty_db);
        Conditions conditions = conditions_for(question, weighting, idle && own.bound == Bound::exact);
        findings.figures.push_back(
            {"noise_output", level, question.scale.unit(), uncertainty_db, 2.0, own.bound, conditions});
        if (!question.gain_db || !question.scale.full_scale_dbu) continue;
        const double input = level - question.gain_db->value_db;
        const double input_uncertainty_db =
            spectrum::combine(uncertainty_db, question.gain_db->uncertainty_db);
        conditions.set("gain_db", question.gain_db->value_db);
        if (question.source_ohms) conditions.set("source_ohms", *question.source_ohms);
        if (question.source_ohms && weighting == Weighting::none)
            require_possible(question, input, input_uncertainty_db);
        findings.figures.push_back(
            {"noise_input_referred", input, "dBu", input_uncertainty_db, 2.0, own.bound, conditions});
    }
    if (question.source_ohms) {
        if (const Figure* input =
                findings.figure("noise_input_referred", {{"weighting", std::string("none")}})) {
            // The source's own share is brought from its temperature to the 290 K the noise figure refers to.
            const double reference = units::power_ratio_from_db(
                thermal_level_dbu(question, Weighting::none, units::noise_reference_temperature_k));
            const double source = reference * (units::celsius_zero_k + question.temperature_c) /
                                  units::noise_reference_temperature_k;
            const double power = units::power_ratio_from_db(input->value) - source + reference;
            const double share = units::power_ratio_from_db(input->value) / std::max(power, 1e-300);
            if (power > 0.0)
                findings.figures.push_back(
                    {"noise_figure", units::db_from_power_ratio(power / reference), "dB",
                     input->uncertainty * share, 2.0, input->bound,
                     Conditions{
                         {"source_ohms", *question.source_ohms},
                         {"temperature_c", question.temperature_c},
                         {"band_hz", std::vector<double>{question.band.low_hz, question.band.high_hz}}}});
        }
    }
    findings.curves.push_back(density_curve(question, spectrum));
    if (drowned)
        findings.cautions.push_back(
            "the interface's own noise is less than 3 dB below what was recorded: the unit's noise is at "
            "most the value given; raise its "
            "gain, or use a quieter input");
    if (!drowned && least_excess_beside_db < 10.0)
        findings.cautions.push_back(fmt::format(
            "an input that hears the interface alone is only {:.1f} dB quieter: up to {:.1f} dB of this "
            "noise may be the interface's",
            least_excess_beside_db,
            -units::db_from_power_ratio(1.0 - units::power_ratio_from_db(-least_excess_beside_db))));
    if (question.gain_db && !question.scale.full_scale_dbu)
        findings.cautions.push_back(
            "noise at the input needs volts: without --input-full-scale-dbu only the level in dBFS is known");
    if (question.source_ohms && !question.gain_db)
        findings.cautions.push_back("the noise figure needs the gain (--gain-db)");
    describe_lines(spectrum, question.band, findings.cautions);
    return findings;
}

}  // namespace coldpin::measure
