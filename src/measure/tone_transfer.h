// Transfer at the tones of a multitone, all fitted together.
#pragma once

#include <vector>

#include "coldpin/measure/transfer.h"

namespace coldpin::measure {

Transfer tone_transfer(const TransferQuestion& question);

// Between two tones: magnitude and phase in straight lines over log f.
TransferPoint tone_between(const std::vector<double>& tones_hz, const std::vector<TransferPoint>& tones,
                           double frequency_hz);

}  // namespace coldpin::measure
