#include "tone_transfer.h"

#include <algorithm>
#include <cmath>

#include <fmt/core.h>

#include "coldpin/spectrum/fft.h"
#include "coldpin/spectrum/sine_fit.h"
#include "coldpin/units/error.h"

#include "tone_fit.h"

namespace coldpin::measure {

namespace {

constexpr double settling_s = 0.1;  // a 20 Hz corner still answers the beginning for 50 ms

// Lag of the largest cross-correlation. A multitone repeats, so neighbouring periods come close; being off by
// one of them leaves the ratios at the tones as they are.
long long correlation_lag(std::span<const double> recording, std::span<const double> sent, double& likeness) {
    const std::size_t size = spectrum::fast_fft_size(recording.size() + sent.size());
    auto bins = spectrum::forward_fft(recording, size);
    const auto other = spectrum::forward_fft(sent, size);
    for (std::size_t k = 0; k < bins.size(); ++k) bins[k] *= std::conj(other[k]);
    const auto lags = spectrum::inverse_fft(bins, size);
    const auto peak = std::max_element(lags.begin(), lags.end(),
                                       [](double a, double b) { return std::abs(a) < std::abs(b); });
    double sum = 0.0;
    for (double x : lags) sum += x * x;
    likeness = std::abs(*peak) / std::sqrt(sum / static_cast<double>(size));
    const auto at = static_cast<long long>(peak - lags.begin());
    return at >= static_cast<long long>(recording.size()) ? at - static_cast<long long>(size) : at;
}

}  // namespace

Transfer tone_transfer(const TransferQuestion& question) {
    std::vector<double> tones = signal::tone_frequencies_hz(*question.stimulus);
    std::sort(tones.begin(), tones.end());
    double likeness = 0.0;
    const long long lag = question.known_delay_frames
                              ? std::llround(*question.known_delay_frames)
                              : correlation_lag(question.recording, question.sent, likeness);
    const auto guard = static_cast<long long>((question.stimulus->fade_s + settling_s) * question.rate_hz);
    const long long begin = std::max(0LL, lag) + guard;
    const long long end = std::min(static_cast<long long>(question.recording.size()),
                                   lag + static_cast<long long>(question.sent.size())) -
                          guard;
    if (end - begin < static_cast<long long>(0.1 * question.rate_hz))
        throw CannotMeasure(
            "the stimulus is not found in the recording, or most of it is cut off: another stimulus, or the "
            "wrong channel");
    const auto frames = static_cast<std::size_t>(end - begin);
    const auto stretch = question.recording.subspan(static_cast<std::size_t>(begin), frames);
    const auto sent = question.sent.subspan(static_cast<std::size_t>(begin - lag), frames);

    Transfer result;
    result.rate_hz = question.rate_hz;
    result.low_hz = tones.front();
    result.high_hz = tones.back();
    result.delay_frames = static_cast<double>(lag);
    const ToneFit heard = fit_tones(stretch, question.rate_hz, tones);
    const auto played = spectrum::fit_sines(sent, question.rate_hz, tones);
    double explained = 0.0;
    for (std::size_t k = 0; k < tones.size(); ++k) {
        const double sent_amplitude = std::abs(played.phasors[k]);
        if (!(sent_amplitude > 0.0))
            throw CannotMeasure("what was sent does not hold the tones that its description names");
        explained += std::norm(heard.phasors[k]) / std::max(heard.std[k] * heard.std[k], 1e-300);
        result.tones_hz.push_back(tones[k]);
        result.tones.push_back({heard.phasors[k] / played.phasors[k], 0.0, heard.std[k] / sent_amplitude});
    }
    if (!question.known_delay_frames && explained < 50.0 * static_cast<double>(tones.size()))
        throw CannotMeasure(
            "the stimulus is not found in the recording: another stimulus, the wrong channel, or the drive "
            "does not reach the unit");
    return result;
}

TransferPoint tone_between(const std::vector<double>& tones_hz, const std::vector<TransferPoint>& tones,
                           double frequency_hz) {
    const auto above = std::lower_bound(tones_hz.begin(), tones_hz.end(), frequency_hz);
    if (above == tones_hz.end()) return tones.back();
    const auto b = static_cast<std::size_t>(above - tones_hz.begin());
    if (b == 0 || *above == frequency_hz) return tones[b];
    const std::size_t a = b - 1;
    const double part = std::log(frequency_hz / tones_hz[a]) / std::log(tones_hz[b] / tones_hz[a]);
    const double magnitude =
        std::pow(std::abs(tones[a].value), 1.0 - part) * std::pow(std::abs(tones[b].value), part);
    const double turn = std::arg(tones[b].value / tones[a].value);
    return {std::polar(magnitude, std::arg(tones[a].value) + part * turn), 0.0,
            std::max(tones[a].std, tones[b].std)};
}

}  // namespace coldpin::measure
