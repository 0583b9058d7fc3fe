#include "continuity.h"

#include <algorithm>
#include <cmath>
#include <complex>
#include <numbers>
#include <utility>
#include <vector>

#include <fmt/core.h>

#include "coldpin/spectrum/statistics.h"
#include "coldpin/spectrum/tone_extent.h"
#include "coldpin/spectrum/window.h"

#include "low_sweep_slips.h"
#include "sweep_lag.h"

namespace coldpin::rig {

namespace {

using spectrum::median;
using Complex = std::complex<double>;
constexpr double two_pi = 2.0 * std::numbers::pi;
constexpr double sure = 7.0;  // standard deviations

// Spread of a series about its slow course, by the median of its second differences.
double spread_of(const std::vector<double>& series) {
    std::vector<double> bends;
    for (std::size_t k = 2; k < series.size(); ++k)
        bends.push_back(std::abs(series[k] - 2.0 * series[k - 1] + series[k - 2]));
    return median(bends) / (0.6745 * std::sqrt(6.0));
}

// The place where `series` steps most, comparing medians of `reach` values on either side, the blocks at the
// place itself left out; the step, and how sure.
struct Step {
    std::size_t at = 0;
    double size = 0.0;
};
Step largest_step(const std::vector<double>& series, std::size_t reach) {
    std::vector<double> steps(series.size(), 0.0);
    for (std::size_t k = 2; k + 2 < series.size(); ++k) {
        const std::size_t first = k > reach ? k - reach : 0, last = std::min(series.size(), k + 1 + reach);
        const std::vector<double> before(series.begin() + static_cast<std::ptrdiff_t>(first),
                                         series.begin() + static_cast<std::ptrdiff_t>(k));
        const std::vector<double> after(series.begin() + static_cast<std::ptrdiff_t>(k) + 1,
                                        series.begin() + static_cast<std::ptrdiff_t>(last));
        if (before.size() >= 2 && after.size() >= 2) steps[k] = median(after) - median(before);
    }
    // A slow course (a filter's group delay) steps a little everywhere; a jump only here.
    Step step;
    for (std::size_t k = 2; k + 2 < series.size(); ++k) {
        const std::size_t first = k > 4 * reach ? k - 4 * reach : 2,
                          last = std::min(series.size() - 2, k + 4 * reach + 1);
        const double around = median({steps.begin() + static_cast<std::ptrdiff_t>(first),
                                      steps.begin() + static_cast<std::ptrdiff_t>(last)});
        if (std::abs(steps[k] - around) > std::abs(step.size)) step = {k, steps[k] - around};
    }
    return step;
}

// ---- tones

struct Blocks {
    std::vector<Complex> phasors;
    std::vector<std::size_t> begins;
    std::size_t length = 0;
};

// Phasors of a tone in half-overlapping blocks, turned back to the recording's beginning.
Blocks tone_blocks(std::span<const double> channel, double step_rad, std::size_t length) {
    const std::vector<double> window = spectrum::window_samples(spectrum::Window::blackman_harris, length);
    Blocks blocks;
    blocks.length = length;
    const Complex turn = std::polar(1.0, -step_rad);
    for (std::size_t begin = 0; begin + length <= channel.size(); begin += length / 2) {
        Complex sum = 0.0,
                phasor = std::polar(1.0, -std::fmod(step_rad * static_cast<double>(begin), two_pi));
        for (std::size_t n = 0; n < length; ++n) {
            sum += channel[begin + n] * window[n] * phasor;
            phasor *= turn;
        }
        blocks.phasors.push_back(sum);
        blocks.begins.push_back(begin);
    }
    return blocks;
}

// The blocks in which the tone sounds: those of the stretch found, and on from there while the tone stays
// half as loud. A jump by half a turn ends the stretch that is coherent, but not the tone.
std::pair<std::size_t, std::size_t> sounding(const Blocks& blocks, const spectrum::Extent& extent) {
    std::vector<double> sizes;
    std::size_t first = blocks.begins.size(), last = 0;
    for (std::size_t k = 0; k < blocks.begins.size(); ++k) {
        if (blocks.begins[k] < extent.begin || blocks.begins[k] + blocks.length > extent.end) continue;
        sizes.push_back(std::abs(blocks.phasors[k]));
        first = std::min(first, k);
        last = k + 1;
    }
    if (sizes.empty()) return {0, 0};
    const double half = 0.5 * median(sizes);
    const auto loud = [&](std::size_t k) { return std::abs(blocks.phasors[k]) > half; };
    // The blocks that hold the jump itself may be quiet: up to three of them are stepped over.
    constexpr std::size_t gap = 3;
    for (std::size_t step = 1; step <= gap + 1 && first >= step; ++step)
        if (loud(first - step)) {
            first -= step;
            step = 0;
        }
    for (std::size_t step = 0; step <= gap && last + step < blocks.phasors.size(); ++step)
        if (loud(last + step)) {
            last += step + 1;
            step = static_cast<std::size_t>(-1);
        }
    // The outermost blocks hold the fades.
    return last - first > 8 ? std::pair{first + 2, last - 2} : std::pair{first, last};
}

void check_tone(std::span<const double> channel, double rate_hz, double frequency_hz, double spacing_hz,
                ContentReport& report) {
    const auto extent = spectrum::find_tone(channel, rate_hz, frequency_hz, 0.02);
    if (!extent.found) return;
    const double length_s = std::max({8.0 / frequency_hz, 6.0 / spacing_hz, 0.01});
    const double step_rad = two_pi * frequency_hz / rate_hz;
    const Blocks blocks = tone_blocks(channel, step_rad, static_cast<std::size_t>(length_s * rate_hz));
    const auto [first, last] = sounding(blocks, extent);
    if (last - first < 8) return;
    std::vector<double> phases;
    for (std::size_t k = first; k < last; ++k) {
        const double angle = std::arg(blocks.phasors[k]);
        phases.push_back(phases.empty() ? angle
                                        : phases.back() + std::remainder(angle - phases.back(), two_pi));
    }
    // Two clocks give a slope; the median of the differences is not moved by one jump.
    std::vector<double> differences;
    for (std::size_t k = 1; k < phases.size(); ++k) differences.push_back(phases[k] - phases[k - 1]);
    const double slope = median(differences);
    for (std::size_t k = 0; k < phases.size(); ++k) phases[k] -= slope * static_cast<double>(k);
    const double spread = spread_of(phases);
    // Phases that scatter that much wander by themselves when they are unwrapped: nothing can be said.
    constexpr double too_faint_rad = 0.3;
    if (spread > too_faint_rad) return;
    const double frame_rad = std::abs(std::remainder(step_rad, two_pi));
    // Proven: a loss of seven frames would stand out.
    if (spread * sure < 3.0 * frame_rad) report.proven = true;
    const Step step = largest_step(phases, 6);
    // Amplitude and clock wander slowly; only what is well beyond half a frame and the scatter is a jump.
    if (std::abs(step.size) < std::max(0.7 * frame_rad, sure * spread)) return;
    report.glitches.push_back(
        {fmt::format("the {:g} Hz tone jumps by {:.2f} turns: frames were lost or repeated", frequency_hz,
                     std::abs(step.size) / two_pi),
         blocks.begins[first + step.at] + blocks.length / 2});
}

void check_tones(std::span<const double> channel, double rate_hz, std::vector<double> tones,
                 ContentReport& report) {
    std::sort(tones.begin(), tones.end());
    // Two tones, one of each half: a loss of whole periods of one is none of the other. Middle frequencies
    // tell most: low ones turn little in a frame, high ones are often filtered.
    std::vector<double> chosen;
    for (double target : {900.0, 3000.0}) {
        const double best = *std::min_element(tones.begin(), tones.end(), [&](double a, double b) {
            return std::abs(std::log(a / target)) < std::abs(std::log(b / target));
        });
        if (std::find(chosen.begin(), chosen.end(), best) == chosen.end()) chosen.push_back(best);
    }
    for (double hz : chosen) {
        double spacing_hz = hz;
        for (double other : tones)
            if (other != hz) spacing_hz = std::min(spacing_hz, std::abs(other - hz));
        check_tone(channel, rate_hz, hz, spacing_hz, report);
        if (!report.whole()) return;
    }
}

// ---- sweeps

// A part of the sweep, in blocks: for each the delay of that moment (frames) and the size of what was heard.
struct Unrolled {
    double rate_hz = 0.0;
    // Of each pair of neighbouring blocks: the later one's frequency, the step to it, the turn of the phase.
    std::vector<double> hz, step_hz, turns_rad;
    std::vector<double> delays, log_sizes;
    std::vector<std::size_t> frames;
};

// Unrolled by the sweep itself, each block's phasor is the response at the frequency of that moment; from one
// block to the next its phase turns by the delay times the step in frequency.
Unrolled unroll(std::span<const double> channel, double rate_hz, const signal::Stimulus& stimulus,
                long long lag, std::size_t block, double low_hz, double high_hz) {
    const auto& sweep = std::get<signal::Sweep>(stimulus.kind);
    const double constant_s = signal::sweep_time_constant_s(sweep, stimulus.length_s);
    const std::size_t sent_frames = signal::frame_count(stimulus);
    // Bell-shaped, so that the image at twice the frequency averages out over a few periods.
    const std::vector<double> window = spectrum::window_samples(spectrum::Window::hann, block);
    Unrolled unrolled;
    unrolled.rate_hz = rate_hz;
    Complex previous = 0.0;
    double previous_hz = 0.0;
    for (std::size_t begin = 0; begin + block <= sent_frames; begin += block) {
        const long long start = static_cast<long long>(begin) + lag;
        if (start < 0 || start + static_cast<long long>(block) > static_cast<long long>(channel.size()))
            continue;
        const double middle_s = (static_cast<double>(begin) + 0.5 * static_cast<double>(block)) / rate_hz;
        const double hz = sweep.from_hz * std::exp(middle_s / constant_s);
        if (hz < std::max(low_hz, 1.5 * sweep.from_hz) || hz > std::min(high_hz, 0.93 * sweep.to_hz))
            continue;
        Complex sum = 0.0;
        for (std::size_t n = 0; n < block; ++n) {
            const double t = static_cast<double>(begin + n) / rate_hz;
            const double turns = sweep.from_hz * constant_s * std::exp(t / constant_s);
            sum += window[n] * channel[static_cast<std::size_t>(start) + n] *
                   std::polar(1.0, -two_pi * std::fmod(turns, 1.0));
        }
        if (previous_hz > 0.0) {
            const double turn_rad = std::arg(sum * std::conj(previous)), step_hz = hz - previous_hz;
            unrolled.hz.push_back(hz);
            unrolled.step_hz.push_back(step_hz);
            unrolled.turns_rad.push_back(turn_rad);
            unrolled.delays.push_back(-turn_rad / two_pi / step_hz * rate_hz);
            unrolled.log_sizes.push_back(std::log(std::max(std::abs(sum), 1e-30)));
            unrolled.frames.push_back(static_cast<std::size_t>(start));
        }
        previous = sum;
        previous_hz = hz;
    }
    return unrolled;
}

// Returns the tightest scatter of the delay in any third, in frames; adds a glitch where it steps.
double check_unrolled(const Unrolled& unrolled, ContentReport& report) {
    const auto& delays = unrolled.delays;
    double tightest = 1e9;
    if (delays.size() < 18) return tightest;
    // Late delays are the surest (large steps in frequency): the series is looked at in thirds, each with its
    // own scatter.
    const std::size_t third = delays.size() / 3;
    for (std::size_t part = 0; part < 3; ++part) {
        const std::size_t first = part * third > 8 ? part * third - 8 : 0,
                          last = std::min(delays.size(), (part + 1) * third + 8);
        const std::vector<double> piece(delays.begin() + static_cast<std::ptrdiff_t>(first),
                                        delays.begin() + static_cast<std::ptrdiff_t>(last));
        const double spread = spread_of(piece);
        tightest = std::min(tightest, spread);
        const Step step = largest_step(piece, 6);
        if (std::abs(step.size) <= std::max(0.7, sure * spread)) continue;
        report.glitches.push_back(
            {fmt::format(
                 "the delay steps by about {:.0f} frame(s) within the sweep: frames were lost or repeated",
                 std::abs(step.size)),
             unrolled.frames[first + step.at]});
        return tightest;
    }
    const Step fade = largest_step(unrolled.log_sizes, 6);
    if (std::abs(fade.size) > std::max(1.4, sure * spread_of(unrolled.log_sizes)))
        report.glitches.push_back(
            {"the sweep breaks off or slips within the recording: frames were lost or repeated",
             unrolled.frames[fade.at]});
    return tightest;
}

void check_sweep(std::span<const double> channel, double rate_hz, const signal::Stimulus& stimulus,
                 std::optional<double> expected, ContentReport& report) {
    const auto sent = signal::render(stimulus);
    Lag lag = lag_of(channel, sent);
    if (expected) lag.frames = std::llround(*expected);
    if (lag.clarity < 12.0 && !expected) return;
    report.delay_frames = static_cast<double>(lag.frames);
    const auto block = std::max<std::size_t>(256, sent.size() / 400);
    const double tightest =
        check_unrolled(unroll(channel, rate_hz, stimulus, lag.frames, block, 1000.0, rate_hz), report);
    if (!report.whole()) return;
    const auto slip = find_low_slip(channel, rate_hz, stimulus, lag.frames);
    if (slip)
        report.glitches.push_back(
            {fmt::format("the sweep's phase jumps by about {:.1f} frame(s): frames were lost or repeated",
                         std::abs(slip->frames)),
             slip->frame});
    report.proven = report.whole() && tightest * sure < 3.5;
}

}  // namespace

void check_continuity(std::span<const double> channel, double rate_hz, const signal::Stimulus& stimulus,
                      std::optional<double> expected_delay_frames, ContentReport& report) {
    if (std::holds_alternative<signal::Sweep>(stimulus.kind)) {
        check_sweep(channel, rate_hz, stimulus, expected_delay_frames, report);
        return;
    }
    const auto tones = signal::tone_frequencies_hz(stimulus);
    if (!tones.empty() && static_cast<double>(channel.size()) > 16.0 * rate_hz / tones.front())
        check_tones(channel, rate_hz, tones, report);
}

}  // namespace coldpin::rig
