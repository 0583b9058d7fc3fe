// A smooth complex curve through noisy bins, read at one frequency.
#pragma once

#include "coldpin/measure/transfer.h"

namespace coldpin::measure {

// Quadratic in frequency through the bins around, weighted by the energy sent and a bell that is a 24th of an
// octave, or six bins, wide; standard deviation from the bins' own. At an edge of the stimulus the bell is
// one-sided by itself, since bins without energy weigh nothing.
TransferPoint local_fit(const TransferBins& bins, double frequency_hz);

}  // namespace coldpin::measure
