// A fixture's computed figures as findings, so that they print and travel as every other figure does.
#pragma once

#include "coldpin/measure/figure.h"
#include "coldpin/rig/fixture_parts.h"

namespace coldpin::check {

// Kind "fixture". Figures: differential_loss, differential_loss_from_emf, differential_loss at
// conditions.frequency_hz, source_resistance, thermal_noise_density, thermal_noise (20 Hz to 20 kHz),
// common_mode_over_differential, gain_error (bound at_most, for conditions.unit_rejection_db);
// common_mode_loss, provable_rejection (what the fixture's own balance can prove); phantom_current. Cautions
// as rig::fixture_cautions. Throws UsageError as rig::fixture_figures.
measure::Findings fixture_findings(const rig::FixtureParts& parts, double unit_rejection_db,
                                   double temperature_c);

}  // namespace coldpin::check
