// The mains frequency and its harmonics in a recording: found together, drift followed.
#pragma once

#include <complex>
#include <optional>
#include <span>
#include <vector>

namespace coldpin::spectrum {

struct HumHarmonic {
    int number = 1;
    double amplitude = 0.0;      // peak, sample units; mean over the recording
    double amplitude_std = 0.0;  // standard deviation from the noise beside the line
    bool significant = false;    // stands out of the noise beside it
};

struct MainsFit {
    bool found = false;
    double frequency_hz = 0.0;  // mean over the recording
    double frequency_std_hz = 0.0;
    double drift_hz = 0.0;  // last minus first of the fitted track
    std::vector<HumHarmonic> harmonics;
    std::vector<double> hum;  // the fitted hum itself, sample by sample, to be subtracted
};

struct MainsSearch {
    double low_hz = 45.0;  // EN 50160 allows 42.5 ... 57.5 and 51 ... 69 on islands, generators on tour more
    double high_hz = 66.0;
    std::optional<double> near_hz;  // narrows the search to +-4 % around it
    double highest_hz = 2000.0;     // harmonics up to here
};

// Coarse: harmonic sum over a windowed spectrum. Fine: common phase track (polynomial of the lowest order
// that the residual asks for) of all significant harmonics by Gauss-Newton with a Blackman-Harris weight, so
// that an unrelated tone a few Hz away does not pull it; then a weighted harmonic least-squares fit along the
// track. found = false when no harmonic stands out of the noise. Needs at least 0.5 s of samples
// (UsageError).
MainsFit fit_mains(std::span<const double> samples, double rate_hz, const MainsSearch& search = {});

}  // namespace coldpin::spectrum
