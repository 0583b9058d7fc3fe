#include "coldpin/spectrum/mains.h"

#include <algorithm>
#include <cmath>
#include <numbers>

#include "coldpin/spectrum/averaged_spectrum.h"
#include "coldpin/spectrum/fft.h"
#include "coldpin/spectrum/phasor_sum.h"
#include "coldpin/spectrum/sine_fit.h"
#include "coldpin/spectrum/window.h"
#include "coldpin/units/error.h"

#include "mains_lines.h"
#include "mains_track.h"

namespace coldpin::spectrum {

namespace {

constexpr double two_pi = 2.0 * std::numbers::pi;
constexpr double significance = 4.5;  // standard deviations; chance exceeds that once in 25,000

struct Decimated {
    std::vector<double> samples;
    double rate_hz = 0.0;
};

// Hum is slow: everything above highest_hz is cut off in the frequency domain, which is exact but for some
// ringing in the first and last milliseconds, where the windows used here weigh nothing.
Decimated decimate(std::span<const double> samples, double rate_hz, double highest_hz) {
    const std::size_t full = samples.size();
    const auto ratio = static_cast<std::size_t>(std::floor(rate_hz / (3.0 * highest_hz)));
    if (ratio < 2) return {{samples.begin(), samples.end()}, rate_hz};
    const std::size_t padded = fast_fft_size(full + 64 * ratio) / ratio * ratio;
    const std::size_t size = padded >= full ? padded : (full / ratio + 1) * ratio;
    const std::size_t small = size / ratio;
    auto bins = forward_fft(samples, size);
    bins.resize(small / 2 + 1);
    if (small % 2 == 0) bins.back() = 0.0;
    Decimated out;
    out.samples = inverse_fft(bins, small);
    const double scale = 1.0 / static_cast<double>(ratio);
    for (double& x : out.samples) x *= scale;
    out.samples.resize(full / ratio);
    out.rate_hz = rate_hz / static_cast<double>(ratio);
    return out;
}

// Steady tones that are no hum are fitted and taken out first, so that they do not leak into a harmonic.
void remove_strangers(Decimated& signal, const Fundamental& fundamental, double resolution_hz) {
    for (const Line& stranger : fundamental.strangers) {
        const double number = std::max(1.0, std::round(stranger.frequency_hz / fundamental.frequency_hz));
        const double distance = std::abs(stranger.frequency_hz - number * fundamental.frequency_hz);
        if (distance > 6.0 || distance < 0.5 * resolution_hz || stranger.snr < 30.0) continue;
        try {
            const SineFit fit = fit_sine_and_frequency(signal.samples, signal.rate_hz, stranger.frequency_hz);
            add_sine(signal.samples, -fit.phasor, two_pi * fit.frequency_hz / signal.rate_hz);
        } catch (const CannotMeasure&) {
            continue;  // not steady: the window alone must keep it out
        }
    }
}

AveragedSpectrum beside_spectrum(const Decimated& signal) {
    WelchSettings settings;
    settings.segment = std::min(static_cast<std::size_t>(2.0 * signal.rate_hz), signal.samples.size() / 2);
    return averaged_spectrum(signal.samples, signal.rate_hz, settings);
}

// Mean density of the noise around a line, by a median over the bins beside it.
double density_beside(const AveragedSpectrum& spectrum, double frequency_hz) {
    const double lobe_hz = main_lobe_half_width_bins(spectrum.window) * spectrum.bin_hz,
                 reach_hz = std::max(20.0, 3.0 * lobe_hz);
    std::vector<double> beside;
    for (auto k = static_cast<std::size_t>(std::max(1.0, (frequency_hz - reach_hz) / spectrum.bin_hz));
         k < spectrum.density.size(); ++k) {
        const double distance = static_cast<double>(k) * spectrum.bin_hz - frequency_hz;
        if (distance > reach_hz) break;
        if (std::abs(distance) > lobe_hz) beside.push_back(spectrum.density[k]);
    }
    if (beside.empty()) return 0.0;
    const auto middle = beside.begin() + static_cast<std::ptrdiff_t>(beside.size() / 2);
    std::nth_element(beside.begin(), middle, beside.end());
    return *middle / std::pow(1.0 - 2.0 / (9.0 * spectrum.degrees_of_freedom), 3);
}

std::vector<double> synthesise(const std::vector<HumHarmonic>& harmonics,
                               const std::vector<std::complex<double>>& phasors, const PhaseTrack& track,
                               double rate_hz, std::size_t count) {
    constexpr std::size_t piece = 256;
    std::vector<double> hum(count, 0.0);
    for (std::size_t begin = 0; begin < count; begin += piece) {
        const std::size_t length = std::min(piece, count - begin);
        const double start_s = static_cast<double>(begin) / rate_hz,
                     middle_s = start_s + 0.5 * static_cast<double>(length) / rate_hz;
        const double local_hz = track.frequency(middle_s), phase = std::fmod(track.phase(start_s), two_pi);
        for (std::size_t h = 0; h < harmonics.size(); ++h) {
            if (!harmonics[h].significant) continue;
            add_sine(std::span(hum).subspan(begin, length),
                     phasors[h] * std::polar(1.0, harmonics[h].number * phase),
                     two_pi * harmonics[h].number * local_hz / rate_hz);
        }
    }
    return hum;
}

}  // namespace

MainsFit fit_mains(std::span<const double> samples, double rate_hz, const MainsSearch& search) {
    if (!(rate_hz > 0.0) || static_cast<double>(samples.size()) < 0.5 * rate_hz)
        throw UsageError("too short for hum: at least half a second is needed");
    MainsFit fit;
    const double highest_hz = std::min(search.highest_hz, 0.45 * rate_hz);
    Decimated signal = decimate(samples, rate_hz, highest_hz * 1.1);
    const LineList list = find_lines(signal.samples, signal.rate_hz, highest_hz);
    const auto fundamental = find_fundamental(list, search);
    if (!fundamental) return fit;
    remove_strangers(signal, *fundamental, list.resolution_hz);
    const PhaseTrack track =
        fit_track(signal.samples, signal.rate_hz, fundamental->frequency_hz, fundamental->harmonics);

    const std::vector<double> window = window_samples(Window::blackman_harris, signal.samples.size());
    const double noise_bins = noise_bandwidth_bins(window),
                 length_s = static_cast<double>(signal.samples.size()) / signal.rate_hz;
    const AveragedSpectrum noise = beside_spectrum(signal);
    std::vector<std::complex<double>> phasors;
    for (int number = 1; number * track.mean_hz() <= highest_hz; ++number) {
        HumHarmonic harmonic;
        harmonic.number = number;
        phasors.push_back(along_track(signal.samples, window, signal.rate_hz, track, number));
        const double density = density_beside(noise, number * track.mean_hz());
        harmonic.amplitude_std = std::sqrt(density * noise_bins / length_s);
        harmonic.significant = std::abs(phasors.back()) > significance * harmonic.amplitude_std;
        // The noise adds its own power to |phasor|^2: both quadratures of it.
        const double power =
            std::norm(phasors.back()) - 2.0 * harmonic.amplitude_std * harmonic.amplitude_std;
        harmonic.amplitude = std::sqrt(std::max(power, 0.0));
        fit.harmonics.push_back(harmonic);
    }
    fit.found = std::any_of(fit.harmonics.begin(), fit.harmonics.end(),
                            [](const HumHarmonic& h) { return h.significant; });
    if (!fit.found) return fit;
    fit.frequency_hz = track.mean_hz();
    fit.frequency_std_hz = track.mean_std_hz;
    fit.drift_hz = track.frequency(track.length_s) - track.frequency(0.0);
    fit.hum = synthesise(fit.harmonics, phasors, track, rate_hz, samples.size());
    return fit;
}

}  // namespace coldpin::spectrum
