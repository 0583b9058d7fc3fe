// The pretended signal path in volts: fixture and preamp between a converter's output and input.
//
// All linear parts act in the frequency domain over the whole take, so that corners beyond half the sample
// rate and fractional delays are exactly those of the analogue formulas, and tests can compute the truth.
#pragma once

#include <complex>
#include <vector>

#include "coldpin/rig/setup.h"

#include "gaussian.h"

namespace coldpin::rig {

// What the simulated unit does at one frequency: the truth that measurements are compared with.
std::complex<double> true_preamp_gain(const SimulatedPreamp& preamp, double gain_db, double frequency_hz);
double true_rejection_db(const SimulatedPreamp& preamp, double frequency_hz);
// Volts per sqrt(Hz) at the input: amplifier and source resistance together.
double true_input_noise_v(const SimulatedPreamp& preamp, double source_ohms, double temperature_k,
                          double frequency_hz);

struct PathState {
    double gain_db = 40.0;
    bool second_channel = false;
    double start_s = 0.0;  // for hum, which does not start anew with each take
};

// Volts at the preamp's output for volts at its input, differential and common mode, all of one length;
// noise, hum, corners, distortion and clipping included.
std::vector<double> through_preamp(const SimulatedSetup& simulated, const SimulatedPreamp& preamp,
                                   const Setup& setup, const PathState& state,
                                   const std::vector<double>& differential_v,
                                   const std::vector<double>& common_mode_v, double rate_hz, Gaussian& noise);

// Adds mains hum: fundamental of the given RMS, odd harmonics falling, even ones 12 dB lower.
void add_hum(std::vector<double>& samples, double fundamental_rms, double slope_db,
             const SimulatedInterface& interface, double start_s, double rate_hz);

}  // namespace coldpin::rig
