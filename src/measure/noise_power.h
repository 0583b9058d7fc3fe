// Spectra and band powers of noise recordings, shared by noise and hum.
#pragma once

#include <span>
#include <string>
#include <vector>

#include "coldpin/measure/scale.h"
#include "coldpin/spectrum/averaged_spectrum.h"
#include "coldpin/spectrum/weighting.h"

namespace coldpin::measure {

// About 1 s segments, so that the band's lower edge at 20 Hz is sharp; shorter for short recordings.
spectrum::AveragedSpectrum noise_spectrum(std::span<const double> samples, double rate_hz);

spectrum::BandPower weighted_power(const spectrum::AveragedSpectrum& spectrum, const Band& band,
                                   spectrum::Weighting weighting);

// Says so when single lines carry more than half of the power in the band.
void describe_lines(const spectrum::AveragedSpectrum& spectrum, const Band& band,
                    std::vector<std::string>& cautions);

}  // namespace coldpin::measure
