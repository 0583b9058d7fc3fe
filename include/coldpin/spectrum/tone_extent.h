// Where in a recording a tone of known frequency sounds, also far under the noise.
#pragma once

#include <cstddef>
#include <span>

namespace coldpin::spectrum {

struct Extent {
    std::size_t begin = 0;    // first frame inside
    std::size_t end = 0;      // one past the last
    double confidence = 0.0;  // detection statistic: about chi-square(2)/2 under noise alone; > 12 is certain
    bool found = false;
};

// Demodulates at the frequency in short blocks and takes the stretch [begin, end) that maximises
// |sum z|^2 / length (generalised likelihood ratio), then draws both ends in by a block and by `guard_s`, so
// that fades stay outside. found = false when the statistic does not stand out from the noise. Throws
// UsageError for a frequency outside (0, rate/2) or fewer than 8 periods of samples.
Extent find_tone(std::span<const double> samples, double rate_hz, double frequency_hz, double guard_s = 0.02);

}  // namespace coldpin::spectrum
