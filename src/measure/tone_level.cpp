#include "tone_level.h"

#include <algorithm>
#include <cmath>
#include <numbers>
#include <optional>

#include <fmt/core.h>

#include "coldpin/spectrum/averaged_spectrum.h"
#include "coldpin/spectrum/mains.h"
#include "coldpin/spectrum/sine_fit.h"
#include "coldpin/spectrum/tone_extent.h"
#include "coldpin/units/error.h"

namespace coldpin::measure {

namespace {

constexpr double shortest_s = 0.05;
constexpr double clocks_apart_ppm = 500.0;  // beyond, it is another tone
constexpr double fade_guard_s = 0.02;

// The strongest line, for the message when the tone asked for is not there.
double loudest_hz(std::span<const double> samples, double rate_hz) {
    const auto spectrum = spectrum::averaged_spectrum(samples, rate_hz);
    const auto first = spectrum.density.begin() +
                       std::min<std::ptrdiff_t>(4, static_cast<std::ptrdiff_t>(spectrum.density.size()) - 1);
    return static_cast<double>(std::max_element(first, spectrum.density.end()) - spectrum.density.begin()) *
           spectrum.bin_hz;
}

[[noreturn]] void refuse(std::span<const double> recording, double rate_hz, double frequency_hz) {
    throw CannotMeasure(
        fmt::format("no tone at {:g} Hz stands out of this recording (the loudest line is near {:.4g} Hz): "
                    "wrong frequency, wrong "
                    "channel, or the drive does not reach the unit",
                    frequency_hz, loudest_hz(recording, rate_hz)));
}

// Whole hum is taken out first: a least-squares fit over a finite stretch sees a little of every line beside
// it.
std::vector<double> without_hum(std::span<const double> stretch, double rate_hz, double frequency_hz,
                                std::vector<std::string>& cautions) {
    std::vector<double> samples(stretch.begin(), stretch.end());
    if (static_cast<double>(samples.size()) < 0.5 * rate_hz) return samples;
    // The tone itself is taken out before looking for hum, or it would count as the hum's harmonic.
    const auto fit = spectrum::fit_sine(stretch, rate_hz, frequency_hz);
    const double step = 2.0 * std::numbers::pi * frequency_hz / rate_hz;
    std::vector<double> rest = samples;
    for (std::size_t n = 0; n < rest.size(); ++n)
        rest[n] -= std::real(
            fit.phasor * std::polar(1.0, std::fmod(step * static_cast<double>(n), 2.0 * std::numbers::pi)));
    const auto mains = spectrum::fit_mains(rest, rate_hz);
    if (!mains.found) return samples;
    const double number = std::max(1.0, std::round(frequency_hz / mains.frequency_hz));
    const double distance_hz = std::abs(frequency_hz - number * mains.frequency_hz);
    if (distance_hz < 1.5 * rate_hz / static_cast<double>(samples.size())) {
        cautions.push_back(
            fmt::format("the tone at {:g} Hz lies on harmonic {:g} of the mains ({:.2f} Hz): hum and tone "
                        "cannot be told apart there; use "
                        "another frequency",
                        frequency_hz, number, mains.frequency_hz));
        return samples;
    }
    for (std::size_t n = 0; n < samples.size(); ++n) samples[n] -= mains.hum[n];
    return samples;
}

}  // namespace

ToneLevel tone_level(std::span<const double> recording, double rate_hz, double frequency_hz,
                     std::vector<std::string>& cautions) {
    if (static_cast<double>(recording.size()) < std::max(shortest_s, 10.0 / frequency_hz) * rate_hz)
        throw UsageError(fmt::format(
            "the recording is too short for {:g} Hz: {:.3f} s; at least {:.3f} s are needed", frequency_hz,
            static_cast<double>(recording.size()) / rate_hz, std::max(shortest_s, 10.0 / frequency_hz)));
    const auto extent = spectrum::find_tone(recording, rate_hz, frequency_hz, fade_guard_s);
    if (!extent.found) refuse(recording, rate_hz, frequency_hz);
    const auto stretch = recording.subspan(extent.begin, extent.end - extent.begin);
    const auto samples = without_hum(stretch, rate_hz, frequency_hz, cautions);

    ToneLevel tone;
    tone.begin = extent.begin;
    tone.end = extent.end;
    tone.frequency_hz = frequency_hz;
    auto fit = spectrum::fit_sine(samples, rate_hz, frequency_hz);
    try {
        const auto free = spectrum::fit_sine_and_frequency(samples, rate_hz, frequency_hz);
        const double off_hz = free.frequency_hz - frequency_hz;
        const bool another_clock =
            std::abs(off_hz) > 6.0 * free.frequency_std_hz && std::abs(off_hz) > 1e-7 * frequency_hz;
        if (another_clock && std::abs(off_hz) < clocks_apart_ppm * 1e-6 * frequency_hz) {
            cautions.push_back(
                fmt::format("the tone is {:+.1f} ppm off its frequency: output and input do not share a "
                            "clock; the fitted frequency is used",
                            off_hz / frequency_hz * 1e6));
            fit = free;
            tone.frequency_hz = free.frequency_hz;
        } else if (another_clock && std::norm(free.phasor) > 1.02 * std::norm(fit.phasor)) {
            refuse(recording, rate_hz, frequency_hz);
        }
    } catch (const CannotMeasure&) {
        // The frequency runs away: what sounds here is another tone, or the one asked for is drowned.
        refuse(recording, rate_hz, frequency_hz);
    }
    tone.phasor = fit.phasor;
    const double length_s = static_cast<double>(samples.size()) / rate_hz;
    const double density = spectrum::noise_density_near(samples, rate_hz, tone.frequency_hz,
                                                        std::max(50.0, 0.05 * tone.frequency_hz));
    // Amplitude variance from the noise beside the tone, S/T a quadrature (Cramer-Rao for that density).
    tone.amplitude_std = std::sqrt(density / length_s);
    tone.amplitude =
        std::sqrt(std::max(std::norm(fit.phasor) - 2.0 * tone.amplitude_std * tone.amplitude_std, 0.0));
    if (!(tone.amplitude > 4.0 * tone.amplitude_std) || tone.amplitude < 1e-9)
        refuse(recording, rate_hz, frequency_hz);
    return tone;
}

}  // namespace coldpin::measure
