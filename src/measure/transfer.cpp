#include "coldpin/measure/transfer.h"

#include <algorithm>
#include <cmath>
#include <numbers>

#include <fmt/core.h>

#include "coldpin/measure/clipping.h"
#include "coldpin/spectrum/averaged_spectrum.h"
#include "coldpin/spectrum/fft.h"
#include "coldpin/spectrum/mains.h"
#include "coldpin/units/error.h"

#include "local_fit.h"
#include "tone_transfer.h"

namespace coldpin::measure {

namespace {

using Spectrum = std::vector<std::complex<double>>;

constexpr double two_pi = 2.0 * std::numbers::pi;
constexpr double longest_tail_s = 1.0;  // of an impulse response: a 1 Hz coupling has died to 0.2 %
constexpr double fewest_frames_s = 0.05;
constexpr double found_ratio = 12.0;  // peak over RMS of the deconvolved recording; noise alone reaches 6
// What is added to the energy sent, re its weakest inside the band. Searching wants noise outside the band
// kept low; estimating wants the edges unbent, where the stimulus fades out, and weighs each bin by its
// energy anyway.
constexpr double search_floor = 1e-5;
constexpr double estimate_floor = 1e-9;

// Everything between lags: index of `lags` is lag modulo its size.
struct Deconvolved {
    std::size_t size = 0;
    Spectrum sent;
    std::vector<double> energy;  // |sent|^2
    double floor = 0.0;          // added to the energy where the stimulus has none
    Spectrum response;           // recording / sent
    std::vector<double> lags;
};

struct Band {
    double low_hz, high_hz;
};

// Where the stimulus has energy: its description knows; else where its smoothed spectrum is within 45 dB of
// the strongest (pink-like stimuli fall by 30 dB from 20 Hz to 20 kHz).
Band energy_band(const TransferQuestion& question, const std::vector<double>& energy, double bin_hz) {
    if (question.stimulus)
        if (const auto* sweep = std::get_if<signal::Sweep>(&question.stimulus->kind))
            return {sweep->from_hz, sweep->to_hz};
    const auto width = static_cast<std::size_t>(std::max(1.0, 10.0 / bin_hz));
    std::vector<double> smooth;
    for (std::size_t k = 0; k + width <= energy.size(); k += width) {
        double sum = 0.0;
        for (std::size_t j = k; j < k + width; ++j) sum += energy[j];
        smooth.push_back(sum);
    }
    // A burst has one hump of spectrum, and only that is of use.
    const bool burst = question.stimulus && std::holds_alternative<signal::Burst>(question.stimulus->kind);
    const double limit = *std::max_element(smooth.begin(), smooth.end()) * (burst ? 0.05 : 3e-5);
    const auto first = std::find_if(smooth.begin(), smooth.end(), [&](double e) { return e > limit; });
    const auto last = std::find_if(smooth.rbegin(), smooth.rend(), [&](double e) { return e > limit; });
    const double step_hz = static_cast<double>(width) * bin_hz;
    return {std::max(2.0, step_hz * static_cast<double>(first - smooth.begin())),
            step_hz * static_cast<double>(smooth.rend() - last)};
}

void divide(Deconvolved& d, std::span<const double> recording) {
    d.response = spectrum::forward_fft(recording, d.size);
    for (std::size_t k = 0; k < d.response.size(); ++k)
        d.response[k] *= std::conj(d.sent[k]) / (d.energy[k] + d.floor);
    d.lags = spectrum::inverse_fft(d.response, d.size);
}

std::size_t wrapped(const Deconvolved& d, long long lag) {
    const auto size = static_cast<long long>(d.size);
    return static_cast<std::size_t>(((lag % size) + size) % size);
}

// A stretch of lags with cosine edges, its zero lag at index 0.
struct Gate {
    long long centre = 0;
    std::size_t before = 0, after = 0;            // frames inside
    std::size_t fade_before = 0, fade_after = 0;  // of those, fading
    double value(long long offset) const {
        const double down = offset < 0 ? static_cast<double>(static_cast<long long>(before) + offset) /
                                             static_cast<double>(std::max<std::size_t>(1, fade_before))
                                       : static_cast<double>(static_cast<long long>(after) - offset) /
                                             static_cast<double>(std::max<std::size_t>(1, fade_after));
        if (down <= 0.0) return 0.0;
        return down >= 1.0 ? 1.0 : 0.5 - 0.5 * std::cos(std::numbers::pi * down);
    }
    double energy() const {
        double sum = 0.0;
        for (long long o = -static_cast<long long>(before); o <= static_cast<long long>(after); ++o)
            sum += value(o) * value(o);
        return sum;
    }
};

std::vector<double> gated(const Deconvolved& d, const Gate& gate, std::size_t size) {
    std::vector<double> out(size, 0.0);
    for (long long o = -static_cast<long long>(gate.before); o <= static_cast<long long>(gate.after); ++o) {
        const auto at =
            o >= 0 ? static_cast<std::size_t>(o) : static_cast<std::size_t>(static_cast<long long>(size) + o);
        out[at] += d.lags[wrapped(d, gate.centre + o)] * gate.value(o);
    }
    return out;
}

long long peak_lag(const Deconvolved& d, std::size_t recording_frames) {
    const auto peak = std::max_element(d.lags.begin(), d.lags.end(),
                                       [](double a, double b) { return std::abs(a) < std::abs(b); });
    const auto at = static_cast<long long>(peak - d.lags.begin());
    return at >= static_cast<long long>(recording_frames) ? at - static_cast<long long>(d.size) : at;
}

void require_found(const Deconvolved& d, long long delay) {
    double sum = 0.0;
    for (double x : d.lags) sum += x * x;
    const double rms = std::sqrt(sum / static_cast<double>(d.lags.size()));
    if (rms > 0.0 && std::abs(d.lags[wrapped(d, delay)]) > found_ratio * rms) return;
    throw CannotMeasure(
        "the stimulus is not found in the recording: another stimulus, the wrong channel, or the drive does "
        "not reach the unit");
}

void require_whole(const TransferQuestion& question, long long delay) {
    if (!question.stimulus) return;
    const double slack = 0.004 * question.rate_hz;
    const double missing = static_cast<double>(delay) + static_cast<double>(question.sent.size()) -
                           static_cast<double>(question.recording.size());
    // The last fade holds next to nothing.
    if (missing > slack + 0.5 * question.stimulus->fade_s * question.rate_hz)
        throw CannotMeasure(fmt::format("the recording ends {:.2f} s before the stimulus does: record longer",
                                        missing / question.rate_hz));
    if (static_cast<double>(delay) < -slack)
        throw CannotMeasure(
            fmt::format("the recording begins {:.2f} s after the stimulus does: start it earlier",
                        -static_cast<double>(delay) / question.rate_hz));
}

// Lags between the linear response and harmonic n of an exponential sweep: rate * L ln n.
double harmonic_lead_frames(const TransferQuestion& question, double number) {
    const auto& sweep = std::get<signal::Sweep>(question.stimulus->kind);
    return signal::sweep_time_constant_s(sweep, question.stimulus->length_s) * std::log(number) *
           question.rate_hz;
}

bool is_sweep(const TransferQuestion& question) {
    return question.stimulus && std::holds_alternative<signal::Sweep>(question.stimulus->kind);
}

Gate linear_gate(const TransferQuestion& question, long long delay) {
    const double rate = question.rate_hz;
    Gate gate;
    gate.centre = delay;
    double before = 0.1 * rate;
    if (is_sweep(question)) before = std::min(before, 0.45 * harmonic_lead_frames(question, 2.0));
    const double after = std::min(longest_tail_s * rate,
                                  std::max(0.05 * rate, 0.5 * static_cast<double>(question.sent.size())));
    gate.before = static_cast<std::size_t>(before);
    gate.after = static_cast<std::size_t>(after);
    gate.fade_before = gate.before / 2;
    gate.fade_after = gate.after / 2;
    return gate;
}

std::vector<double> convolved(const Deconvolved& d, const std::vector<double>& response_at_lags,
                              std::size_t frames) {
    auto bins = spectrum::forward_fft(response_at_lags, d.size);
    for (std::size_t k = 0; k < bins.size(); ++k) bins[k] *= d.sent[k];
    auto samples = spectrum::inverse_fft(bins, d.size);
    samples.resize(frames);
    return samples;
}

// The gated response put back at its own lags.
std::vector<double> at_lags(const Deconvolved& d, const Gate& gate) {
    std::vector<double> out(d.size, 0.0);
    for (long long o = -static_cast<long long>(gate.before); o <= static_cast<long long>(gate.after); ++o)
        out[wrapped(d, gate.centre + o)] = d.lags[wrapped(d, gate.centre + o)] * gate.value(o);
    return out;
}

std::vector<double> residual_of(const Deconvolved& d, const Gate& gate, std::span<const double> recording) {
    auto residual = convolved(d, at_lags(d, gate), recording.size());
    for (std::size_t n = 0; n < residual.size(); ++n) residual[n] = recording[n] - residual[n];
    return residual;
}

// Density of what the linear response leaves, per sample and bin: white noise of variance s^2 gives s^2.
std::vector<double> residual_power(std::span<const double> residual, double rate_hz, std::size_t bins,
                                   double bin_hz) {
    spectrum::WelchSettings settings;
    settings.segment = std::min<std::size_t>(8192, residual.size() / 2);
    const auto spectrum = spectrum::averaged_spectrum(residual, rate_hz, settings);
    std::vector<double> power(bins);
    for (std::size_t k = 0; k < bins; ++k) {
        const double at = static_cast<double>(k) * bin_hz / spectrum.bin_hz;
        const auto low = std::min(static_cast<std::size_t>(at), spectrum.density.size() - 2);
        const double part = std::min(at - static_cast<double>(low), 1.0);
        power[k] = 0.5 * rate_hz * (spectrum.density[low] * (1.0 - part) + spectrum.density[low + 1] * part);
    }
    return power;
}

TransferBins bins_of(const Deconvolved& d, const Gate& gate, double fraction,
                     std::span<const double> residual, double rate_hz) {
    const std::size_t size = spectrum::fast_fft_size(gate.before + gate.after + 1);
    TransferBins bins;
    bins.bin_hz = rate_hz / static_cast<double>(size);
    bins.value = spectrum::forward_fft(gated(d, gate, size));
    const auto noise = residual_power(residual, rate_hz, bins.value.size(), bins.bin_hz);
    const double gate_energy = gate.energy(), ratio = static_cast<double>(d.size) / static_cast<double>(size);
    for (std::size_t k = 0; k < bins.value.size(); ++k) {
        // Energy sent around this bin, over the bin's width.
        const auto from = static_cast<std::size_t>(std::max(0.0, (static_cast<double>(k) - 0.5) * ratio));
        const auto to =
            std::min(d.energy.size() - 1, static_cast<std::size_t>((static_cast<double>(k) + 0.5) * ratio));
        double sum = 0.0;
        for (std::size_t j = from; j <= to; ++j) sum += d.energy[j];
        const double energy = sum / static_cast<double>(to - from + 1);
        bins.weight.push_back(energy > 1e3 * d.floor ? energy : 0.0);
        // Noise at these lags, filtered by 1/sent, seen through the gate; half of it in each part.
        bins.std.push_back(std::sqrt(0.5 * noise[k] * gate_energy / (energy + d.floor)));
        // What is left of a delay in whole frames.
        if (fraction != 0.0)
            bins.value[k] *=
                std::polar(1.0, two_pi * static_cast<double>(k) * bins.bin_hz * fraction / rate_hz);
    }
    return bins;
}

Deconvolved prepare(const TransferQuestion& question) {
    Deconvolved d;
    d.size = spectrum::fast_fft_size(question.recording.size() + question.sent.size());
    d.sent = spectrum::forward_fft(question.sent, d.size);
    d.energy.resize(d.sent.size());
    for (std::size_t k = 0; k < d.sent.size(); ++k) d.energy[k] = std::norm(d.sent[k]);
    return d;
}

// The weakest energy inside the band.
double weakest_energy(const Deconvolved& d, const Band& band, double bin_hz) {
    double weakest = 0.0;
    constexpr int parts = 40;
    for (int i = 1; i < parts; ++i) {
        const double hz = band.low_hz * std::pow(band.high_hz / band.low_hz, static_cast<double>(i) / parts);
        const auto at = static_cast<std::size_t>(hz / bin_hz), reach = std::max<std::size_t>(2, at / 100);
        double sum = 0.0;
        std::size_t count = 0;
        for (std::size_t k = at > reach ? at - reach : 0; k <= std::min(d.energy.size() - 1, at + reach);
             ++k, ++count)
            sum += d.energy[k];
        const double mean = sum / static_cast<double>(std::max<std::size_t>(1, count));
        weakest = weakest == 0.0 ? mean : std::min(weakest, mean);
    }
    return weakest;
}

void add_harmonics(Transfer& result, const TransferQuestion& question, const Deconvolved& d,
                   std::span<const double> residual) {
    for (int number = 2; number <= question.highest_harmonic; ++number) {
        const double lead = harmonic_lead_frames(question, number);
        const double to_next = harmonic_lead_frames(question, (number + 1.0) / number),
                     to_previous = harmonic_lead_frames(question, number / (number - 1.0));
        const double place = result.delay_frames - lead;
        Gate gate;
        gate.centre = std::llround(place);
        gate.before = static_cast<std::size_t>(std::min(0.05 * question.rate_hz, 0.4 * to_next));
        gate.after = static_cast<std::size_t>(std::min(0.5 * question.rate_hz, 0.5 * to_previous));
        gate.fade_before = gate.before / 2;
        gate.fade_after = gate.after / 2;
        result.harmonics.push_back(
            bins_of(d, gate, place - static_cast<double>(gate.centre), residual, question.rate_hz));
    }
}

}  // namespace

TransferPoint Transfer::at(double frequency_hz) const {
    if (is_tones()) return tone_between(tones_hz, tones, frequency_hz);
    return local_fit(bins, frequency_hz);
}

TransferPoint Transfer::harmonic_at(int number, double exciting_hz) const {
    return local_fit(harmonics.at(static_cast<std::size_t>(number) - 2), number * exciting_hz);
}

Transfer transfer(const TransferQuestion& question) {
    if (!(question.rate_hz > 0.0) || question.sent.empty())
        throw UsageError("a transfer function needs a sample rate and what was sent");
    if (static_cast<double>(question.recording.size()) < fewest_frames_s * question.rate_hz)
        throw UsageError(fmt::format("the recording is too short: {:.3f} s; at least {:g} s are needed",
                                     static_cast<double>(question.recording.size()) / question.rate_hz,
                                     fewest_frames_s));
    require_not_silent(question.recording, "the recording");
    require_not_silent(question.sent, "what was sent");
    if (question.stimulus) {
        if (std::holds_alternative<signal::Tone>(question.stimulus->kind))
            throw CannotMeasure(
                "a single tone says nothing about other frequencies, and its delay and polarity cannot be "
                "told apart: use a sweep or a multitone");
        if (std::holds_alternative<signal::Silence>(question.stimulus->kind))
            throw CannotMeasure("the stimulus is silence: use a sweep or a multitone");
        if (std::holds_alternative<signal::Multitone>(question.stimulus->kind))
            return tone_transfer(question);
    }

    Deconvolved d = prepare(question);
    const double bin_hz = question.rate_hz / static_cast<double>(d.size);
    const Band band = energy_band(question, d.energy, bin_hz);
    const double weakest = weakest_energy(d, band, bin_hz);
    // A sweep's energy falls steeply outside its band; of other stimuli nothing is known there.
    d.floor = (is_sweep(question) ? search_floor : 0.1) * weakest;
    std::vector<double> recording(question.recording.begin(), question.recording.end());
    divide(d, recording);
    Transfer result;
    result.rate_hz = question.rate_hz;
    result.low_hz = band.low_hz;
    result.high_hz = band.high_hz;
    long long delay = question.known_delay_frames ? std::llround(*question.known_delay_frames)
                                                  : peak_lag(d, recording.size());
    if (!question.known_delay_frames) {
        require_found(d, delay);
        require_whole(question, delay);
    }
    d.floor = (is_sweep(question) ? estimate_floor : 1e-3) * weakest;
    divide(d, recording);
    // Hum is found in what the response leaves of the recording; the response in turn takes in a little hum,
    // so both are estimated in turns. Each turn leaves a few per cent of what the one before did.
    Gate gate = linear_gate(question, delay);
    std::vector<double> residual = residual_of(d, gate, recording);
    if (static_cast<double>(residual.size()) > question.rate_hz) {
        for (int turn = 0; turn < 3; ++turn) {
            const auto mains = spectrum::fit_mains(residual, question.rate_hz);
            if (!mains.found) break;
            double removed = 0.0;
            for (std::size_t n = 0; n < recording.size(); ++n) {
                recording[n] -= mains.hum[n];
                removed += mains.hum[n] * mains.hum[n];
            }
            const double removed_rms = std::sqrt(removed / static_cast<double>(recording.size()));
            result.hum_removed_rms = std::hypot(result.hum_removed_rms, removed_rms);
            divide(d, recording);
            if (!question.known_delay_frames) delay = peak_lag(d, recording.size());
            gate = linear_gate(question, delay);
            residual = residual_of(d, gate, recording);
            if (removed_rms < 0.003 * result.hum_removed_rms) break;
        }
    }
    result.delay_frames = static_cast<double>(delay);
    result.bins = bins_of(d, gate, 0.0, residual, question.rate_hz);
    if (is_sweep(question)) add_harmonics(result, question, d, residual);
    return result;
}

}  // namespace coldpin::measure
