// The parts of the path probe and where they lie.
#pragma once

#include <array>
#include <cstddef>
#include <vector>

#include "coldpin/signal/stimulus.h"

namespace coldpin::rig {

struct ProbePart {
    std::size_t begin = 0, end = 0;  // frames from the probe's first
    double level_db = 0.0;           // re the probe's level
};

struct PathProbe {
    double rate_hz = 0.0;
    double level_dbfs = 0.0;
    double low_hz = 997.0;  // of the staircase
    double high_hz = 0.0;   // of the tone near the end of the band
    std::array<ProbePart, 4> stairs;
    ProbePart high_tone;
    ProbePart sweep_part;
    ProbePart anchor;        // the low tone once more
    signal::Stimulus sweep;  // as in sweep_part, fades included
    std::size_t frames = 0;
};

// Throws UsageError as render_path_probe().
PathProbe make_path_probe(double rate_hz, double level_dbfs);
std::vector<double> render(const PathProbe& probe);

}  // namespace coldpin::rig
