#include "tone_level.h"

#include <algorithm>
#include <cmath>
#include <numbers>

#include <fmt/core.h>

#include "coldpin/spectrum/averaged_spectrum.h"
#include "coldpin/spectrum/mains.h"
#include "coldpin/spectrum/sine_fit.h"
#include "coldpin/spectrum/tone_extent.h"
#include "coldpin/units/error.h"

#include "steady_tone.h"

namespace coldpin::measure {

namespace {

constexpr double shortest_s = 0.05;
constexpr double clocks_apart_ppm = 500.0;  // beyond, it is another tone
constexpr double fade_guard_s = 0.02;
constexpr double faintest = 1e-9;  // -180 dBFS: below the last bit of any converter

// The strongest line, for the message when the tone asked for is not there.
double loudest_hz(std::span<const double> samples, double rate_hz) {
    const auto spectrum = spectrum::averaged_spectrum(samples, rate_hz);
    const auto& d = spectrum.density;
    if (d.size() < 8) return 0.0;
    const auto k = static_cast<std::size_t>(std::max_element(d.begin() + 4, d.end() - 1) - d.begin());
    const double around = d[k - 1] + d[k] + d[k + 1];
    const double shift = around > 0.0 ? (d[k + 1] - d[k - 1]) / around : 0.0;
    return (static_cast<double>(k) + shift) * spectrum.bin_hz;
}

[[noreturn]] void refuse(double loudest, double frequency_hz) {
    throw CannotMeasure(
        fmt::format("no tone at {:g} Hz stands out of this recording (the loudest line is near {:.5g} Hz): "
                    "wrong frequency, wrong channel, or the drive does not reach the unit",
                    frequency_hz, loudest));
}

// A stretch with the tone in it, and what was found there.
struct Sighting {
    spectrum::Extent extent;
    SteadyTone tone;
    double density = 0.0;  // of the noise beside the tone
};

double part_std(const Sighting& sighting) {
    return std::sqrt(hann_noise_bandwidth * sighting.density / sighting.tone.part_s);
}

Sighting sight(std::span<const double> recording, double rate_hz, double asked_hz, double frequency_hz) {
    Sighting sighting;
    sighting.extent = spectrum::find_tone(recording, rate_hz, frequency_hz, fade_guard_s);
    if (!sighting.extent.found) refuse(loudest_hz(recording, rate_hz), asked_hz);
    const auto stretch =
        recording.subspan(sighting.extent.begin, sighting.extent.end - sighting.extent.begin);
    sighting.tone = follow_tone(stretch, rate_hz, frequency_hz);
    sighting.density = spectrum::noise_density_near(stretch, rate_hz, sighting.tone.frequency_hz,
                                                    std::max(50.0, 0.05 * frequency_hz));
    return sighting;
}

// What the noise alone would let the frequency scatter, or what the parts show, whichever is more.
double frequency_std_hz(const Sighting& sighting) {
    const double radians = part_std(sighting) / std::max(std::abs(sighting.tone.phasor), 1e-300);
    // Seven parts at half a part's distance: the sum of squared distances is 28 (part / 2)^2 = 7 part^2.
    const double noise = 1.2 * radians / (std::sqrt(7.0) * sighting.tone.part_s) / (2.0 * std::numbers::pi);
    return std::max(noise, sighting.tone.frequency_std_hz);
}

// Settles whether the tone asked for is there, at its own frequency or at that of another clock.
Sighting find_clock(std::span<const double> recording, double rate_hz, double frequency_hz) {
    Sighting sighting = sight(recording, rate_hz, frequency_hz, frequency_hz);
    for (int round = 0; round < 3; ++round) {
        const double off_hz = sighting.tone.frequency_hz - frequency_hz;
        if (!(sighting.tone.coherence > 0.7) || std::abs(sighting.tone.phasor) < faintest)
            refuse(loudest_hz(recording, rate_hz), frequency_hz);
        const bool significant =
            std::abs(off_hz) > std::max(6.0 * frequency_std_hz(sighting), 1e-7 * frequency_hz);
        if (!significant) {
            sighting.tone.frequency_hz = frequency_hz;
            return sighting;
        }
        if (std::abs(off_hz) > clocks_apart_ppm * 1e-6 * frequency_hz) {
            // The fit names the tone best, unless what it followed is only the skirt of something louder.
            const double loudest = loudest_hz(recording, rate_hz), fitted = sighting.tone.frequency_hz;
            refuse(std::abs(loudest / fitted - 1.0) < 0.02 ? fitted : loudest, frequency_hz);
        }
        // At its own frequency the tone is seen over all of its length.
        const Sighting longer = sight(recording, rate_hz, frequency_hz, sighting.tone.frequency_hz);
        const bool grown = longer.tone.part_s > 1.05 * sighting.tone.part_s;
        if (longer.tone.part_s >= sighting.tone.part_s) sighting = longer;
        if (!grown) break;
    }
    return sighting;
}

void subtract_tone(std::vector<double>& samples, double rate_hz, double frequency_hz,
                   std::complex<double> phasor) {
    const double turns = frequency_hz / rate_hz;
    for (std::size_t n = 0; n < samples.size(); ++n) {
        const double angle = 2.0 * std::numbers::pi * std::fmod(turns * static_cast<double>(n), 1.0);
        samples[n] -= phasor.real() * std::cos(angle) - phasor.imag() * std::sin(angle);
    }
}

// Hum is fitted beside the tone and taken out; the tone is taken out first, or it would count as a harmonic.
std::vector<double> without_hum(std::span<const double> stretch, double rate_hz, const SteadyTone& tone,
                                std::vector<std::string>& cautions) {
    std::vector<double> samples(stretch.begin(), stretch.end());
    const double length_s = static_cast<double>(samples.size()) / rate_hz;
    if (length_s < 0.5) return samples;
    std::vector<double> rest = samples;
    subtract_tone(rest, rate_hz, tone.frequency_hz, hann_weighted_sine(stretch, rate_hz, tone.frequency_hz));
    const auto mains = spectrum::fit_mains(rest, rate_hz);
    if (!mains.found) return samples;
    const double number = std::max(1.0, std::round(tone.frequency_hz / mains.frequency_hz));
    // What the tone itself leaves must not pass for a harmonic of a mains that nothing else shows.
    const auto others =
        std::count_if(mains.harmonics.begin(), mains.harmonics.end(), [&](const auto& harmonic) {
            return harmonic.significant && static_cast<double>(harmonic.number) != number;
        });
    if (others >= 2 && std::abs(tone.frequency_hz - number * mains.frequency_hz) < 1.5 / length_s)
        cautions.push_back(
            fmt::format("the tone at {:g} Hz lies on harmonic {:g} of the mains ({:.2f} Hz): hum and tone "
                        "cannot be told apart there; use another frequency",
                        tone.frequency_hz, number, mains.frequency_hz));
    for (std::size_t n = 0; n < samples.size(); ++n) samples[n] -= mains.hum[n];
    return samples;
}

double harmonics_ratio(std::span<const double> samples, double rate_hz, double frequency_hz,
                       double amplitude) {
    double squares = 0.0;
    for (int number = 2; number <= 5 && number * frequency_hz < 0.49 * rate_hz; ++number)
        squares += std::norm(hann_weighted_sine(samples, rate_hz, number * frequency_hz));
    return std::sqrt(squares) / amplitude;
}

// Standard deviation of the amplitude over the whole stretch: the noise beside the tone, and what its parts
// disagree beyond that noise (a line too close to be seen apart, a level that drifts), as four parts have it.
double amplitude_std(const SteadyTone& parts, double density, double length_s) {
    const double noise = std::sqrt(hann_noise_bandwidth * density / length_s);
    const double expected = hann_noise_bandwidth * density / parts.part_s,
                 seen = parts.amplitude_scatter * parts.amplitude_scatter;
    // Chance exceeds four times the expected once in 300.
    return seen > 4.0 * expected ? std::hypot(noise, 0.5 * std::sqrt(seen - expected)) : noise;
}

}  // namespace

ToneLevel tone_level(std::span<const double> recording, double rate_hz, double frequency_hz,
                     std::vector<std::string>& cautions) {
    if (static_cast<double>(recording.size()) < std::max(shortest_s, 10.0 / frequency_hz) * rate_hz)
        throw UsageError(fmt::format(
            "the recording is too short for {:g} Hz: {:.3f} s; at least {:.3f} s are needed", frequency_hz,
            static_cast<double>(recording.size()) / rate_hz, std::max(shortest_s, 10.0 / frequency_hz)));
    const Sighting sighting = find_clock(recording, rate_hz, frequency_hz);
    const auto stretch =
        recording.subspan(sighting.extent.begin, sighting.extent.end - sighting.extent.begin);
    ToneLevel tone;
    tone.begin = sighting.extent.begin;
    tone.end = sighting.extent.end;
    // find_tone() drew both ends in by the guard and a block of 10 ms.
    tone.sounding_s = std::min(static_cast<double>(stretch.size()) / rate_hz + 2.0 * (fade_guard_s + 0.01),
                               static_cast<double>(recording.size()) / rate_hz);
    tone.frequency_hz = sighting.tone.frequency_hz;
    if (tone.frequency_hz != frequency_hz)
        cautions.push_back(
            fmt::format("the tone is {:+.1f} ppm off its frequency: output and input do not share a "
                        "clock; the fitted frequency is used",
                        (tone.frequency_hz / frequency_hz - 1.0) * 1e6));
    const auto samples = without_hum(stretch, rate_hz, sighting.tone, cautions);
    const SteadyTone parts = follow_tone(samples, rate_hz, tone.frequency_hz);
    tone.phasor = hann_weighted_sine(samples, rate_hz, tone.frequency_hz);
    const double density = spectrum::noise_density_near(samples, rate_hz, tone.frequency_hz,
                                                        std::max(50.0, 0.05 * tone.frequency_hz));
    const double length_s = static_cast<double>(samples.size()) / rate_hz;
    tone.amplitude_std = amplitude_std(parts, density, length_s);
    // The noise adds its own power to |phasor|^2: both quadratures of it.
    const double bias = 2.0 * hann_noise_bandwidth * density / length_s;
    tone.amplitude = std::sqrt(std::max(std::norm(tone.phasor) - bias, 0.0));
    if (!(tone.amplitude > 4.0 * tone.amplitude_std) || tone.amplitude < faintest)
        refuse(loudest_hz(recording, rate_hz), frequency_hz);
    tone.harmonics_ratio = harmonics_ratio(samples, rate_hz, tone.frequency_hz, tone.amplitude);
    if (parts.amplitude_scatter >
        0.01 * tone.amplitude + 3.0 * std::sqrt(hann_noise_bandwidth * density / parts.part_s))
        cautions.push_back(fmt::format(
            "the tone at {:g} Hz is not steady: parts of it differ by {:.2g} %; the uncertainty counts that",
            frequency_hz, 100.0 * parts.amplitude_scatter / tone.amplitude));
    return tone;
}

}  // namespace coldpin::measure
