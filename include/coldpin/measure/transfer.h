// The complex transfer function from what was sent to what came back.
//
// Broadband stimuli: regularised division of spectra (what was really sent, not what was meant), the impulse
// response gated so that noise and, for exponential sweeps, harmonics stay out (Novak, Lotton, Simon, JAES
// 63(10), 2015), mains hum fitted and subtracted, then a local quadratic in frequency weighted by the energy
// sent, which stays exact up to the edges of the stimulus and says how uncertain it is. Multitones: a joint
// least-squares fit of all tones. Shared by response, polarity, latency and common-mode rejection.
#pragma once

#include <complex>
#include <cstddef>
#include <optional>
#include <span>
#include <vector>

#include "coldpin/signal/stimulus.h"

namespace coldpin::measure {

struct TransferQuestion {
    std::span<const double> recording;
    std::span<const double> sent;  // stimulus samples, or the reference channel
    double rate_hz = 0.0;
    std::optional<signal::Stimulus> stimulus;  // its description, when known
    int highest_harmonic = 1;                  // of sweeps; 1: none
    std::optional<double> known_delay_frames;  // then the stimulus is not searched for, nor missed
};

// Values on a regular grid of frequencies (or at tones), to be read through at().
struct TransferPoint {
    std::complex<double> value;
    std::complex<double> slope_per_hz;  // derivative by frequency; 0 for tones
    double std = 0.0;                   // standard deviation of each of real and imaginary part
};

struct TransferBins {
    double bin_hz = 0.0;
    std::vector<std::complex<double>> value;  // from 0 Hz; delay taken out
    std::vector<double> weight;               // energy sent
    std::vector<double> std;                  // per bin, each of real and imaginary part
};

struct Transfer {
    double rate_hz = 0.0;
    double low_hz = 0.0;        // the stimulus has energy from here
    double high_hz = 0.0;       // to here
    double delay_frames = 0.0;  // whole frames taken out of the phases; values are exp(i w delay) * H

    TransferBins bins;                    // broadband stimuli
    std::vector<double> tones_hz;         // multitones: ascending, with
    std::vector<TransferPoint> tones;     // their values
    std::vector<TransferBins> harmonics;  // [0]: harmonic 2, over its own (output) frequency

    double hum_removed_rms = 0.0;  // sample units
    bool is_tones() const noexcept { return !tones_hz.empty(); }
    // The linear response at any frequency between low_hz and high_hz.
    TransferPoint at(double frequency_hz) const;
    // Harmonic n at its exciting frequency: response at n times that frequency.
    TransferPoint harmonic_at(int number, double exciting_hz) const;
};

// Throws CannotMeasure when the stimulus is not found in the recording (silence, another stimulus, wrong
// channel), its end or beginning is cut off, or it is a single tone; UsageError for unfit arguments.
Transfer transfer(const TransferQuestion& question);

}  // namespace coldpin::measure
