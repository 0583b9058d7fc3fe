// A fixture described by its parts: what sits between an interface's output and a preamp's input.
//
// Resistances in ohm, tolerances as fractions (0.01 = 1 %). "Pin 1" is the shield, the reference of all
// voltages.
#pragma once

#include <optional>
#include <string>

namespace coldpin::rig {

// How the interface's output drives its two pins.
enum class OutputKind {
    balanced,            // both, in opposition
    impedance_balanced,  // pin 2 alone; pin 3 rests behind the same resistance
    single_ended         // pin 2 alone; pin 3 is the shield
};

// Where the pad's shunt has its middle.
enum class PadKind {
    floating,       // one resistor across: common mode passes unattenuated
    split,          // two halves, the middle on pin 1
    driven_centre,  // two halves, the middle on the common-mode output: pad and feed in one box
};

struct Pad {
    PadKind kind = PadKind::split;
    double series_ohms = 7500.0;  // in each leg
    double shunt_ohms = 150.0;    // across; each half has half of it
    double tolerance = 0.01;
};

// A pair of resistors from one output to both legs. A driven centre is its own feed.
struct CommonModeFeed {
    double leg_ohms = 75.0;
    double tolerance = 0.001;
};

struct PreampInput {
    double differential_ohms = 2000.0;    // between the legs, all paths together
    double leg_to_shield_ohms = 10000.0;  // each; what a common-mode source sees, twice in parallel
};

struct LeadCable {
    double length_m = 0.0;
    double leg_to_shield_pf_per_m = 120.0;
    double leg_to_leg_pf_per_m = 60.0;
    double ohms_per_m = 0.08;  // each leg
    double mismatch = 0.02;    // between the legs
};

struct FixtureParts {
    std::string name;
    OutputKind output = OutputKind::balanced;
    double output_ohms = 100.0;  // between its pins, all together
    std::optional<Pad> pad;
    std::optional<CommonModeFeed> feed;
    PreampInput preamp;
    LeadCable cable;
    std::optional<double> blocking_farads;  // in the line of the common-mode output: keeps phantom power out

    // Measured by substitution, they win over what the resistors say.
    std::optional<double> measured_differential_loss_db;
    double measured_differential_loss_uncertainty_db = 0.0;
    std::optional<double> measured_common_mode_loss_db;
    double measured_common_mode_loss_uncertainty_db = 0.0;
};

}  // namespace coldpin::rig
