#include "path_recording.h"

#include <algorithm>
#include <cmath>
#include <numbers>

#include "coldpin/spectrum/fft.h"
#include "coldpin/spectrum/phasor_sum.h"
#include "coldpin/spectrum/statistics.h"
#include "coldpin/spectrum/window.h"

#include "sweep_lag.h"

namespace coldpin::rig {

using Complex = std::complex<double>;
using spectrum::median;

namespace {

constexpr double two_pi = 2.0 * std::numbers::pi;

}  // namespace

PathRecording::Place PathRecording::place() {
    // A rate that differs or a limiter smears the sweep; it is heard all the same.
    constexpr double certain = 12.0;
    const Lag found = lag_of(x, signal::render(probe.sweep));
    if (found.clarity < certain) return {false, false};
    lag = found.frames - static_cast<long long>(probe.sweep_part.begin);
    constexpr double room_s = 0.05;
    if (part(0, probe.frames + static_cast<std::size_t>(room_s * rate)).empty()) return {true, false};
    unroll();
    return {true, true};
}

std::span<const double> PathRecording::part(std::size_t begin, std::size_t end) const {
    const auto first = static_cast<long long>(begin) + lag, last = static_cast<long long>(end) + lag;
    if (first < 0 || last > static_cast<long long>(x.size())) return {};
    return x.subspan(static_cast<std::size_t>(first), end - begin);
}

Complex PathRecording::phasor(std::size_t begin, std::size_t end, double hz) const {
    const auto samples = part(begin, end);
    if (samples.empty()) return 0.0;
    std::vector<double> windowed(samples.begin(), samples.end());
    const auto window = spectrum::window_samples(spectrum::Window::hann, windowed.size());
    double sum = 0.0;
    for (std::size_t n = 0; n < windowed.size(); ++n) {
        windowed[n] *= window[n];
        sum += window[n];
    }
    const double step = two_pi * hz / rate;
    return 2.0 / sum * spectrum::phasor_sum(windowed, step) *
           std::polar(1.0, -two_pi * std::fmod(hz / rate * static_cast<double>(begin), 1.0));
}

// The transfer function from the sweep alone.
void PathRecording::unroll() {
    const auto margin = static_cast<std::size_t>(0.004 * rate), tail = static_cast<std::size_t>(0.049 * rate);
    const auto cut = part(probe.sweep_part.begin - margin, probe.sweep_part.end + tail);
    auto sent = signal::render(probe.sweep);
    sent.insert(sent.begin(), margin, 0.0);
    const std::size_t size = spectrum::fast_fft_size(cut.size() + sent.size());
    const auto received = spectrum::forward_fft(cut, size);
    const auto played = spectrum::forward_fft(sent, size);
    bin_hz = rate / static_cast<double>(size);
    double strongest = 0.0;
    for (const Complex& bin : played) strongest = std::max(strongest, std::norm(bin));
    transfer.resize(received.size());
    for (std::size_t k = 0; k < received.size(); ++k)
        transfer[k] = received[k] * std::conj(played[k]) / (std::norm(played[k]) + 1e-7 * strongest);
    size_ = size;
}

std::vector<double> PathRecording::band_response(double low_hz, double high_hz) const {
    std::vector<Complex> bins(transfer.size(), 0.0);
    const auto rise = [](double hz, double from, double to) {
        const double along = std::clamp(std::log(hz / from) / std::log(to / from), 0.0, 1.0);
        return 0.5 - 0.5 * std::cos(std::numbers::pi * along);
    };
    for (std::size_t k = 1; k < bins.size(); ++k) {
        const double hz = bin_hz * static_cast<double>(k);
        bins[k] = transfer[k] * rise(hz, low_hz / 1.26, low_hz * 1.26) *
                  (1.0 - rise(hz, high_hz / 1.26, high_hz * 1.26));
    }
    return spectrum::inverse_fft(bins, size_);
}

BandPeak PathRecording::band_peak(double low_hz, double high_hz) const {
    const auto response = band_response(low_hz, high_hz);
    std::size_t at = 0;
    for (std::size_t n = 0; n < response.size(); ++n)
        if (std::abs(response[n]) > std::abs(response[at])) at = n;
    const auto value = [&](std::size_t n) { return std::abs(response[n % response.size()]); };
    const double before = value(at + response.size() - 1), here = value(at), after = value(at + 1);
    const double bend = before - 2.0 * here + after;
    const double fraction = bend < 0.0 ? 0.5 * (before - after) / bend : 0.0;
    const double place = static_cast<double>(at) + fraction;
    return {here, place > 0.5 * static_cast<double>(size_) ? place - static_cast<double>(size_) : place};
}

Phases PathRecording::phases(std::size_t begin, std::size_t end, double hz) const {
    Phases found;
    const auto block = static_cast<std::size_t>(0.012 * rate), hop = block / 2;
    for (std::size_t at = begin; at + block <= end; at += hop) {
        const Complex tone = phasor(at, at + block, hz);
        const double angle = std::arg(tone);
        found.rad.push_back(
            found.rad.empty() ? angle : found.rad.back() + std::remainder(angle - found.rad.back(), two_pi));
        found.frame.push_back(static_cast<double>(at) + 0.5 * static_cast<double>(block));
    }
    if (found.rad.size() < 6) return {};
    std::vector<double> turns;
    for (std::size_t k = 1; k < found.rad.size(); ++k) turns.push_back(found.rad[k] - found.rad[k - 1]);
    const double turn = median(turns);
    found.slope_rad_per_frame = turn / static_cast<double>(hop);
    // Second differences are blind to slopes and to clocks that wander slowly.
    std::vector<double> bends;
    for (std::size_t k = 1; k < turns.size(); ++k) bends.push_back(std::abs(turns[k] - turns[k - 1]));
    found.spread_rad = median(bends) / (0.6745 * std::sqrt(6.0));
    return found;
}

double PathRecording::magnitude(double hz) const {
    const auto first = static_cast<std::size_t>(hz * 0.966 / bin_hz),
               last = static_cast<std::size_t>(hz * 1.035 / bin_hz) + 1;
    double sum = 0.0;
    for (std::size_t k = first; k <= std::min(last, transfer.size() - 1); ++k) sum += std::norm(transfer[k]);
    return std::sqrt(sum / static_cast<double>(last - first + 1));
}

}  // namespace coldpin::rig
