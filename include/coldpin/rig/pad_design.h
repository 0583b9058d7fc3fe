// Pads the other way: from attenuation and source resistance wanted to parts that can be bought.
#pragma once

#include <optional>

#include "coldpin/rig/fixture_parts.h"
#include "coldpin/units/preferred_values.h"

namespace coldpin::rig {

struct PadWish {
    double loss_db = 40.0;  // from the output's pins into the preamp's input
    double source_ohms = 150.0;
    std::optional<double> input_ohms;  // of the preamp; absent: unloaded
    PadKind kind = PadKind::split;
    units::PreferredSeries series = units::PreferredSeries::e96;
};

struct PadDesign {
    Pad pad;                        // series_ohms: all that is in a leg
    double series_trim_ohms = 0.0;  // of that, a second resistor in series; 0: one resistor is near enough
    double loss_db = 0.0;           // what these parts give
    double loss_error_db = 0.0;
    double source_ohms = 0.0;
    double source_error = 0.0;  // fraction
};

// The pair of preferred values that keeps both wishes best: 0.1 dB counts as much as 2 % of the source
// resistance. A split shunt is made of two halves, each a preferred value. Throws UsageError for wishes that
// no pad fulfils (a loss below 6 dB or above 100 dB, a resistance outside 1 ohm to 100 kohm).
PadDesign design_pad(const PadWish& wish);

}  // namespace coldpin::rig
