// What a fixture does, computed from its parts by nodal analysis.
#pragma once

#include <optional>
#include <string>
#include <vector>

#include "coldpin/rig/fixture_parts.h"
#include "coldpin/rig/setup.h"

namespace coldpin::rig {

// Uncertainties are expanded (k = 2): each part's tolerance taken as a rectangular distribution (GUM 4.3.7),
// combined by the sensitivities. Losses are positive for less.
struct PadFigures {
    double loss_db = 0.0;           // level across the output's pins to level across the preamp's input
    double loss_from_emf_db = 0.0;  // from the output's unloaded level: what its own resistance adds is in it
    double loss_uncertainty_db = 0.0;
    double loss_at_20_khz_db = 0.0;  // relative to loss_db: cables
    double source_ohms = 0.0;        // what the preamp's input sees
    double source_uncertainty_ohms = 0.0;
    // With the pad driven: common-mode level at the preamp's input over the differential one.
    double common_mode_over_differential_db = -300.0;
};

struct FeedFigures {
    double loss_db = 0.0;  // level across the output's pins (of a balanced one, twice pin 2 against shield)
                           // to the common-mode level at the preamp's input
    double loss_uncertainty_db = 0.0;
    double rejection_limit_db = 0.0;  // with every part at the unluckiest end of its tolerance, worst of
                                      // 50 Hz, 1 kHz and 20 kHz
    double rejection_limit_20_khz_db = 0.0;
};

// 48 V phantom power through 6.81 kohm into each leg (IEC 61938), the outputs at rest.
struct PhantomFigures {
    double pad_leg_amperes = 0.0;  // into each pin of the differential output
    double feed_amperes = 0.0;     // into pin 2 of the common-mode output
    double highest_output_volts = 0.0;
};

struct FixtureFigures {
    std::optional<PadFigures> pad;
    std::optional<FeedFigures> feed;
    PhantomFigures phantom;
};

// Throws UsageError for parts that cannot be (zero, negative, tolerance of 1 and more, an input resistance
// above twice that of a leg, neither pad nor feed).
FixtureFigures fixture_figures(const FixtureParts& parts);

// The worst gain error in dB that the common mode left by a pad makes on a unit of that rejection: 20 lg(1 +
// e) with e = common mode over differential, over the rejection.
double gain_error_db(const PadFigures& pad, double unit_rejection_db);

// For a rig: computed, or measured where measured. `unit_rejection_db` is the least that is expected of units
// to be measured: what it leaves of the pad's common mode goes into the loss' uncertainty; throws UsageError
// when that is more than 1 dB, saying what to change.
Fixture fixture_for_rig(const FixtureParts& parts, double unit_rejection_db);

// Plain sentences about what applies: phantom current, floating shunts on single-ended outputs, loading.
std::vector<std::string> fixture_cautions(const FixtureParts& parts, const FixtureFigures& figures);

}  // namespace coldpin::rig
