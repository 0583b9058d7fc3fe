// First half of the mains search: narrow lines in a spectrum, and the fundamental that explains them best.
#pragma once

#include <optional>
#include <span>
#include <vector>

#include "coldpin/spectrum/mains.h"

namespace coldpin::spectrum {

struct Line {
    double frequency_hz = 0.0;
    double snr = 0.0;  // power over the noise beside it
};

// Lines that stand out of the noise beside them, up to highest_hz, and that noise (mean density per bin).
struct LineList {
    std::vector<Line> lines;
    double bin_hz = 0.0;
    double resolution_hz = 0.0;  // half width of a line
};
LineList find_lines(std::span<const double> samples, double rate_hz, double highest_hz);

struct Fundamental {
    double frequency_hz = 0.0;
    std::vector<int> harmonics;   // numbers whose lines were seen
    std::vector<Line> strangers;  // lines that are no harmonic of it
};
std::optional<Fundamental> find_fundamental(const LineList& list, const MainsSearch& search);

}  // namespace coldpin::spectrum
