// Whether noise is as steady as chance allows: crackle and bad contacts are not.
#pragma once

#include <span>

#include "coldpin/measure/scale.h"

namespace coldpin::measure {

struct Steadiness {
    bool steady = true;
    double relative_std = 0.0;  // of the whole recording's power, from what its parts differ by
    double spread_db = 0.0;     // loudest part over quietest
};

// Compares the power of eight parts within the band (above 50 Hz: short segments cannot see lower).
// relative_std_by_chance: of the whole recording's power, were the noise steady.
Steadiness noise_steadiness(std::span<const double> samples, double rate_hz, const Band& band,
                            double relative_std_by_chance);

}  // namespace coldpin::measure
