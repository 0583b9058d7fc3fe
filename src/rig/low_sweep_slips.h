// Lost and repeated frames low in a sweep, where a frame turns the phase by a fraction of a degree.
#pragma once

#include <cstddef>
#include <optional>
#include <span>

#include "coldpin/signal/stimulus.h"

namespace coldpin::rig {

struct LowSlip {
    std::size_t frame = 0;  // of the recording, about
    double frames = 0.0;    // lost (positive: what follows comes early) or repeated
};

// Looks where the sweep runs from 1.5 times its beginning to rate/64 (750 Hz at 48 kHz). `lag`: frames by
// which the recording lags the stimulus, within a period of the truth. The recording is cut into sixteenths
// of the sweep's own turns; at each of them a smooth sweep (complex amplitude, second and third harmonic and
// offset as polynomials over two turns) is fitted with a step of the complex amplitude. A filter turns the
// phase smoothly, a loss at once: by 2 pi f n / rate. Losses of whole turns are not seen here (the delay
// tells those).
std::optional<LowSlip> find_low_slip(std::span<const double> channel, double rate_hz,
                                     const signal::Stimulus& stimulus, long long lag);

}  // namespace coldpin::rig
