// What came back of the path probe, placed and taken apart; shared by everything that looks at it.
#pragma once

#include <complex>
#include <cstddef>
#include <span>
#include <vector>

#include "path_probe.h"

namespace coldpin::rig {

// The peak of a band's response: its size, and its delay in frames from where the sweep was taken to begin.
struct BandPeak {
    double size = 0.0, delay = 0.0;
};

// Phases of a tone block by block; empty when there are too few.
struct Phases {
    std::vector<double> rad, frame;
    double slope_rad_per_frame = 0.0, spread_rad = 0.0;
};

class PathRecording {
  public:
    PathRecording(std::span<const double> samples, const PathProbe& probe_played)
        : x(samples), probe(probe_played), rate(probe_played.rate_hz) {}

    // Finds the sweep and, where all of the probe lies within the recording, what the path does to it. How
    // clearly it stands out, and whether it is all there; without both nothing below may be asked.
    struct Place {
        bool heard = false, whole = false;
    };
    Place place();

    // [begin, end) of the probe, as recorded; empty beyond the recording.
    std::span<const double> part(std::size_t begin, std::size_t end) const;
    // Peak amplitude and phase of a tone in [begin, end) of the probe, as of frame 0 of the probe, by a Hann
    // window.
    std::complex<double> phasor(std::size_t begin, std::size_t end, double hz) const;
    // Between two frequencies with soft edges: the impulse response there, from the sweep alone.
    std::vector<double> band_response(double low_hz, double high_hz) const;
    BandPeak band_peak(double low_hz, double high_hz) const;
    Phases phases(std::size_t begin, std::size_t end, double hz) const;
    // A tenth of an octave around, so that noise and ripple do not decide.
    double magnitude(double hz) const;

    const std::span<const double> x;
    const PathProbe& probe;
    const double rate;
    long long lag = 0;                           // of the probe's first frame
    std::vector<std::complex<double>> transfer;  // bin by bin
    double bin_hz = 1.0;

  private:
    void unroll();
    std::size_t size_ = 0;
};

}  // namespace coldpin::rig
