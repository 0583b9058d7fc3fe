#include "coldpin/signal/stimulus.h"

#include <algorithm>
#include <cmath>
#include <complex>
#include <numbers>

#include <fmt/core.h>

#include "coldpin/units/error.h"
#include "coldpin/units/level.h"

namespace coldpin::signal {

namespace {

constexpr double two_pi = 2.0 * std::numbers::pi;
constexpr double longest_s = 24.0 * 3600.0;
constexpr std::size_t most_frames = std::size_t{1} << 31;

template <class... Handlers>
struct Overloaded : Handlers... {
    using Handlers::operator()...;
};
template <class... Handlers>
Overloaded(Handlers...) -> Overloaded<Handlers...>;  // clang 14 does not deduce it by itself

void require_finite(double value, const char* what) {
    if (!std::isfinite(value)) throw UsageError(fmt::format("stimulus: {} must be a number", what));
}

void require_below_nyquist(double frequency_hz, double rate_hz) {
    if (!(frequency_hz > 0.0) || !(frequency_hz < rate_hz / 2.0))
        throw UsageError(fmt::format(
            "stimulus: {:g} Hz lies outside what {:g} Hz sampling carries (above 0, below {:g} Hz)",
            frequency_hz, rate_hz, rate_hz / 2.0));
}

void add_sine(std::vector<double>& samples, double frequency_hz, double phase, double amplitude,
              double rate_hz) {
    // A rotating phasor is six times faster than sin(); starting it anew every so often keeps it exact to
    // 1e-13.
    constexpr std::size_t restart = 512;
    const double step = two_pi * frequency_hz / rate_hz;
    const std::complex<double> turn = std::polar(1.0, step);
    for (std::size_t begin = 0; begin < samples.size(); begin += restart) {
        // The turns are reduced first: the argument of a late sample would lose digits otherwise.
        const double turns = std::fmod(static_cast<double>(begin) * (frequency_hz / rate_hz), 1.0);
        std::complex<double> phasor = std::polar(amplitude, two_pi * turns + phase);
        const std::size_t end = std::min(samples.size(), begin + restart);
        for (std::size_t n = begin; n < end; ++n) {
            samples[n] += phasor.imag();
            phasor = {phasor.real() * turn.real() - phasor.imag() * turn.imag(),
                      phasor.real() * turn.imag() + phasor.imag() * turn.real()};
        }
    }
}

std::vector<double> multitone_at_unit_rms(const Multitone& multitone, const Stimulus& stimulus) {
    std::vector<double> samples(frame_count(stimulus), 0.0);
    const auto count = static_cast<double>(multitone.frequencies_hz.size());
    const double amplitude = std::sqrt(2.0 / count);
    for (std::size_t k = 0; k < multitone.frequencies_hz.size(); ++k) {
        const auto i = static_cast<double>(k);
        // Schroeder 1970 for equal powers: phase_k = -pi k (k + 1) / N; the sum sweeps instead of peaking.
        add_sine(samples, multitone.frequencies_hz[k], -std::numbers::pi * i * (i + 1.0) / count, amplitude,
                 stimulus.rate_hz);
    }
    return samples;
}

double peak_of(const std::vector<double>& samples) {
    double peak = 0.0;
    for (double x : samples) peak = std::max(peak, std::abs(x));
    return peak;
}

std::vector<double> sweep_samples(const Sweep& sweep, const Stimulus& stimulus) {
    std::vector<double> samples(frame_count(stimulus));
    const double amplitude = units::sine_peak_from_dbfs(stimulus.level_dbfs);
    const double constant_s = sweep_time_constant_s(sweep, stimulus.length_s);
    for (std::size_t n = 0; n < samples.size(); ++n) {
        const double t = static_cast<double>(n) / stimulus.rate_hz;
        const double turns = sweep.from_hz * constant_s * std::exp(t / constant_s);
        samples[n] = amplitude * std::sin(two_pi * std::fmod(turns, 1.0));
    }
    return samples;
}

void fade(std::vector<double>& samples, std::size_t frames) {
    for (std::size_t n = 0; n < frames && n < samples.size(); ++n) {
        const double gain = 0.5 - 0.5 * std::cos(std::numbers::pi * (static_cast<double>(n) + 0.5) /
                                                 static_cast<double>(frames));
        samples[n] *= gain;
        samples[samples.size() - 1 - n] *= gain;
    }
}

void require_fitting_kind(const Stimulus& s) {
    std::visit(Overloaded{[&](const Tone& tone) { require_below_nyquist(tone.frequency_hz, s.rate_hz); },
                          [&](const Multitone& multitone) {
                              if (multitone.frequencies_hz.empty())
                                  throw UsageError("stimulus: a multitone needs at least one frequency");
                              if (multitone.frequencies_hz.size() > 2000)
                                  throw UsageError("stimulus: more than 2000 tones");
                              for (double f : multitone.frequencies_hz) require_below_nyquist(f, s.rate_hz);
                          },
                          [&](const Sweep& sweep) {
                              require_below_nyquist(sweep.from_hz, s.rate_hz);
                              require_below_nyquist(sweep.to_hz, s.rate_hz);
                              if (!(sweep.to_hz > sweep.from_hz))
                                  throw UsageError(fmt::format(
                                      "stimulus: a sweep rises: from {:g} Hz must be below to {:g} Hz",
                                      sweep.from_hz, sweep.to_hz));
                          },
                          [](const Silence&) {},
                          [&](const Burst& burst) {
                              require_below_nyquist(burst.frequency_hz, s.rate_hz);
                              if (burst.cycles < 1)
                                  throw UsageError("stimulus: a burst needs at least one cycle");
                              if (burst.cycles / burst.frequency_hz > s.length_s)
                                  throw UsageError(
                                      fmt::format("stimulus: {} cycles of {:g} Hz last longer than {:g} s",
                                                  burst.cycles, burst.frequency_hz, s.length_s));
                          }},
               s.kind);
}

bool has_fades(const Stimulus& s) {
    return !std::holds_alternative<Silence>(s.kind) && !std::holds_alternative<Burst>(s.kind);
}

// Peak over RMS-as-dBFS amplitude: how far the samples of a multitone rise above a sine of the same level.
void require_multitone_fits(double peak_at_unit_rms, const Stimulus& s) {
    const double peak = peak_at_unit_rms * units::sample_rms_from_dbfs(s.level_dbfs);
    if (peak <= 1.0) return;
    const double highest = units::dbfs_from_sample_rms(1.0 / peak_at_unit_rms);
    throw UsageError(
        fmt::format("stimulus: at {:g} dBFS this multitone would exceed full scale; the highest level that "
                    "fits is {:.2f} dBFS",
                    s.level_dbfs, std::floor(highest * 100.0) / 100.0));
}

}  // namespace

void require_valid(const Stimulus& s) {
    require_finite(s.rate_hz, "the sample rate");
    require_finite(s.length_s, "the length");
    require_finite(s.level_dbfs, "the level");
    require_finite(s.fade_s, "the fade");
    if (s.rate_hz < 1000.0 || s.rate_hz > 1e6)
        throw UsageError(
            fmt::format("stimulus: a sample rate of {:g} Hz; expected 1000 to 1000000", s.rate_hz));
    if (!(s.length_s > 0.0) || s.length_s > longest_s ||
        s.length_s * s.rate_hz > static_cast<double>(most_frames))
        throw UsageError(
            fmt::format("stimulus: a length of {:g} s; expected above 0 and at most a day", s.length_s));
    if (s.length_s * s.rate_hz < 1.0) throw UsageError("stimulus: shorter than one sample");
    if (s.fade_s < 0.0 || (has_fades(s) && s.length_s < 2.0 * s.fade_s))
        throw UsageError(
            fmt::format("stimulus: {:g} s is too short for two fades of {:g} s", s.length_s, s.fade_s));
    require_fitting_kind(s);
    if (std::holds_alternative<Silence>(s.kind)) return;
    if (const auto* multitone = std::get_if<Multitone>(&s.kind)) {
        // A bound first: the tones cannot add up to more than all of their peaks.
        const double bound = std::sqrt(2.0 * static_cast<double>(multitone->frequencies_hz.size()));
        if (bound * units::sample_rms_from_dbfs(s.level_dbfs) > 1.0)
            require_multitone_fits(peak_of(multitone_at_unit_rms(*multitone, s)), s);
        return;
    }
    if (s.level_dbfs > 0.0)
        throw UsageError(
            fmt::format("stimulus: {:g} dBFS is above full scale; at most 0 dBFS", s.level_dbfs));
}

std::size_t frame_count(const Stimulus& stimulus) {
    return static_cast<std::size_t>(std::llround(stimulus.length_s * stimulus.rate_hz));
}

std::vector<double> render(const Stimulus& s) {
    require_valid(s);
    std::vector<double> samples = std::visit(
        Overloaded{
            [&](const Tone& tone) {
                std::vector<double> out(frame_count(s), 0.0);
                add_sine(out, tone.frequency_hz, 0.0, units::sine_peak_from_dbfs(s.level_dbfs), s.rate_hz);
                return out;
            },
            [&](const Multitone& multitone) {
                std::vector<double> out = multitone_at_unit_rms(multitone, s);
                const double rms = units::sample_rms_from_dbfs(s.level_dbfs);
                for (double& x : out) x *= rms;
                return out;
            },
            [&](const Sweep& sweep) { return sweep_samples(sweep, s); },
            [&](const Silence&) { return std::vector<double>(frame_count(s), 0.0); },
            [&](const Burst& burst) {
                std::vector<double> out(
                    static_cast<std::size_t>(std::llround(burst.cycles / burst.frequency_hz * s.rate_hz)),
                    0.0);
                add_sine(out, burst.frequency_hz, 0.0, units::sine_peak_from_dbfs(s.level_dbfs), s.rate_hz);
                out.resize(frame_count(s), 0.0);
                return out;
            }},
        s.kind);
    if (has_fades(s)) fade(samples, static_cast<std::size_t>(std::llround(s.fade_s * s.rate_hz)));
    return samples;
}

std::string kind_name(const Stimulus& stimulus) {
    return std::visit(
        Overloaded{[](const Tone&) { return "tone"; }, [](const Multitone&) { return "multitone"; },
                   [](const Sweep&) { return "sweep"; }, [](const Silence&) { return "silence"; },
                   [](const Burst&) { return "burst"; }},
        stimulus.kind);
}

double sweep_time_constant_s(const Sweep& sweep, double length_s) {
    return length_s / std::log(sweep.to_hz / sweep.from_hz);
}

std::vector<double> tone_frequencies_hz(const Stimulus& stimulus) {
    if (const auto* tone = std::get_if<Tone>(&stimulus.kind)) return {tone->frequency_hz};
    if (const auto* multitone = std::get_if<Multitone>(&stimulus.kind)) return multitone->frequencies_hz;
    return {};
}

}  // namespace coldpin::signal
