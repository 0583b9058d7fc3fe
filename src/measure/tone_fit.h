// Several tones fitted together over one stretch, with hum fitted beside them and taken out.
#pragma once

#include <complex>
#include <span>
#include <vector>

namespace coldpin::measure {

struct ToneFit {
    std::vector<std::complex<double>> phasors;  // peak amplitudes, phase at the stretch's first frame
    std::vector<double> std;  // standard deviation of each amplitude, from the noise beside it
    double mains_hz = 0.0;    // of the hum that was taken out; 0 when there was none
};

// Hum on a tone's own frequency (within the stretch's resolution) cannot be told from it and stays in. Throws
// as spectrum::fit_sines().
ToneFit fit_tones(std::span<const double> stretch, double rate_hz, std::span<const double> tones_hz);

}  // namespace coldpin::measure
