// What is played, as plain descriptions, and its rendering to samples.
//
// A stimulus is described completely by this struct: the same description gives the same samples, so that a
// recording's description is enough to know what was sent. Levels are dBFS (a sine of peak 1.0 is 0 dBFS);
// the level of a multitone is its RMS as dBFS; of a sweep and a burst that of the sine while it lasts.
#pragma once

#include <cstddef>
#include <string>
#include <variant>
#include <vector>

namespace coldpin::signal {

struct Tone {
    double frequency_hz = 997.0;
    bool operator==(const Tone&) const = default;
};

// Equal-amplitude sines with phases after Schroeder (1970) for a low crest factor.
struct Multitone {
    std::vector<double> frequencies_hz;
    bool operator==(const Multitone&) const = default;
};

// Synchronised exponential sweep (Novak, Lotton, Simon, JAES 63(10), 2015):
// x(t) = a sin(2 pi f1 L exp(t / L)), L = length / ln(f2 / f1). Harmonic n of it is the sweep itself,
// early by L ln n.
struct Sweep {
    double from_hz = 20.0;
    double to_hz = 20000.0;
    bool operator==(const Sweep&) const = default;
};

struct Silence {
    bool operator==(const Silence&) const = default;
};

// Whole cycles of a sine from a zero crossing, then silence to the end.
struct Burst {
    double frequency_hz = 5000.0;
    int cycles = 5;
    bool operator==(const Burst&) const = default;
};

using StimulusKind = std::variant<Tone, Multitone, Sweep, Silence, Burst>;

struct Stimulus {
    StimulusKind kind = Silence{};
    double length_s = 1.0;
    double level_dbfs = -20.0;  // ignored for silence
    double rate_hz = 48000.0;
    double fade_s = 0.01;  // raised-cosine at both ends; bursts have none
    bool operator==(const Stimulus&) const = default;
};

// Throws UsageError when a frequency is not within (0, rate/2), a sweep does not rise, the length is shorter
// than two fades or a burst, the level would exceed full scale (a multitone's message names the highest level
// that fits), or a number is not finite.
void require_valid(const Stimulus& stimulus);

// Frames that render() returns: length times rate, rounded.
std::size_t frame_count(const Stimulus& stimulus);

// The samples, full scale = 1.0; deterministic, sample-accurate, fades included. Throws as require_valid().
std::vector<double> render(const Stimulus& stimulus);

// "tone", "multitone", "sweep", "silence" or "burst".
std::string kind_name(const Stimulus& stimulus);

// The sweep's time constant L in s: harmonic n leads by L ln n.
double sweep_time_constant_s(const Sweep& sweep, double length_s);

// Tones' frequencies of a tone or multitone; empty for the other kinds.
std::vector<double> tone_frequencies_hz(const Stimulus& stimulus);

}  // namespace coldpin::signal
