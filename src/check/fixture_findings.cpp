#include "coldpin/check/fixture_findings.h"

#include <algorithm>

#include "coldpin/rig/fixture_figures.h"
#include "coldpin/units/level.h"
#include "coldpin/units/physics.h"

namespace coldpin::check {

namespace {

constexpr double no_common_mode_db = -200.0;
constexpr double audio_low_hz = 20.0, audio_high_hz = 20000.0;

}  // namespace

measure::Findings fixture_findings(const rig::FixtureParts& parts, double unit_rejection_db,
                                   double temperature_c) {
    const rig::FixtureFigures figures = rig::fixture_figures(parts);
    measure::Findings findings;
    findings.kind = "fixture";
    const auto add = [&](const char* quantity, double value, const char* unit, double uncertainty,
                         measure::Conditions conditions = {}, measure::Bound bound = measure::Bound::exact) {
        findings.figures.push_back({quantity, value, unit, uncertainty, 2.0, bound, std::move(conditions)});
    };
    if (figures.pad) {
        const auto& pad = *figures.pad;
        if (parts.measured_differential_loss_db)
            add("differential_loss", *parts.measured_differential_loss_db, "dB",
                parts.measured_differential_loss_uncertainty_db, {{"measured", true}});
        add("differential_loss", pad.loss_db, "dB", pad.loss_uncertainty_db);
        add("differential_loss_from_emf", pad.loss_from_emf_db, "dB", pad.loss_uncertainty_db);
        add("differential_loss", pad.loss_db + pad.loss_at_20_khz_db, "dB", pad.loss_uncertainty_db,
            {{"frequency_hz", 20000.0}});
        add("source_resistance", pad.source_ohms, "ohm", pad.source_uncertainty_ohms);
        const double kelvin = units::celsius_zero_k + temperature_c;
        const measure::Conditions warm = {{"temperature_c", temperature_c}};
        const double relative = 0.5 * pad.source_uncertainty_ohms / pad.source_ohms;
        const double density = units::thermal_noise_density_v(pad.source_ohms, kelvin);
        add("thermal_noise_density", 1e9 * density, "nV/sqrt(Hz)", 1e9 * density * relative, warm);
        add("thermal_noise",
            units::dbu_from_volts_rms(
                units::thermal_noise_volts(pad.source_ohms, kelvin, audio_high_hz - audio_low_hz)),
            "dBu", relative * units::db_per_relative_amplitude,
            {{"temperature_c", temperature_c},
             {"band_hz", std::vector<double>{audio_low_hz, audio_high_hz}}});
        if (pad.common_mode_over_differential_db > no_common_mode_db) {
            add("common_mode_over_differential", pad.common_mode_over_differential_db, "dB", 0.0);
            add("gain_error", rig::gain_error_db(pad, unit_rejection_db), "dB", 0.0,
                {{"unit_rejection_db", unit_rejection_db}}, measure::Bound::at_most);
        }
    }
    if (figures.feed) {
        const auto& feed = *figures.feed;
        if (parts.measured_common_mode_loss_db)
            add("common_mode_loss", *parts.measured_common_mode_loss_db, "dB",
                parts.measured_common_mode_loss_uncertainty_db, {{"measured", true}});
        add("common_mode_loss", feed.loss_db, "dB", feed.loss_uncertainty_db);
        add("provable_rejection", feed.rejection_limit_db, "dB", 0.0, {}, measure::Bound::at_most);
        add("provable_rejection", feed.rejection_limit_20_khz_db, "dB", 0.0, {{"frequency_hz", 20000.0}},
            measure::Bound::at_most);
    }
    add("phantom_current", 1000.0 * std::max(figures.phantom.pad_leg_amperes, figures.phantom.feed_amperes),
        "mA", 0.0);
    findings.cautions = rig::fixture_cautions(parts, figures);
    return findings;
}

}  // namespace coldpin::check
