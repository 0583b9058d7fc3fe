// Pure delay of a device that also has corners.
#pragma once

#include "coldpin/measure/transfer.h"

namespace coldpin::measure {

struct DelayFit {
    double frames = 0.0;  // whole delay: what transfer() took out plus the rest
    double std_frames = 0.0;
    int polarity = 1;
    double confidence = 0.0;  // 0 ... 1: how much of the response agrees with that polarity
};

// Least squares of K exp(-i w t) times a high-pass and a low-pass to the logarithm of the complex response
// over the stimulus' span; both of first order, or of second where the first leaves more than noise explains.
// A corner beyond the span still bends magnitude and phase inside it, and without it in the model its group
// delay would pass for latency (60 kHz: 0.13 frames at 48 kHz).
DelayFit fit_delay(const Transfer& transfer);

}  // namespace coldpin::measure
