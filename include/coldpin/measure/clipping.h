// Flat tops: a converter or an amplifier at its end stop.
#pragma once

#include <cstddef>
#include <span>

namespace coldpin::measure {

struct Clipping {
    std::size_t samples_at_full_scale = 0;  // |x| >= 0.9999
    std::size_t flat_runs = 0;  // three or more equal samples in a row at an end stop (no rounded crest)
    bool clipped() const noexcept { return samples_at_full_scale >= 2 || flat_runs >= 2; }
};

// Never allocates. A silent span is not clipped.
Clipping find_clipping(std::span<const double> samples);

// Throws CannotMeasure that names `what` and says what to turn down.
void require_unclipped(std::span<const double> samples, const char* what);

// Throws CannotMeasure when every sample is exactly or nearly (below 1e-9) zero, or the same constant.
void require_not_silent(std::span<const double> samples, const char* what);

}  // namespace coldpin::measure
