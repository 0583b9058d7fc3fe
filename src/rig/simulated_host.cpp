#include "simulated_host.h"

#include <algorithm>
#include <cmath>
#include <complex>
#include <numbers>

#include "coldpin/spectrum/fft.h"
#include "coldpin/spectrum/resample.h"
#include "coldpin/units/level.h"

namespace coldpin::rig {

namespace {

constexpr double shelf_hz = 200.0;
constexpr double ppm = 1e-6;

void sum_all(std::vector<std::vector<float>>& channels) {
    if (channels.size() < 2) return;
    std::vector<float> sum(channels.front().size(), 0.0F);
    for (const auto& channel : channels)
        for (std::size_t n = 0; n < sum.size(); ++n)
            sum[n] += channel[n] / static_cast<float>(channels.size());
    for (auto& channel : channels) channel = sum;
}

void silence(std::vector<std::vector<float>>& channels, const std::optional<int>& number) {
    if (number && static_cast<std::size_t>(*number) <= channels.size())
        std::fill(channels[static_cast<std::size_t>(*number) - 1].begin(),
                  channels[static_cast<std::size_t>(*number) - 1].end(), 0.0F);
}

// Feed-forward, peak-sensing, one time constant up and one down.
void limit(std::vector<double>& samples, double rate_hz, const SimulatedFaults& faults) {
    const double up = 1.0 - std::exp(-1.0 / (faults.limiter_attack_s * rate_hz)),
                 down = std::exp(-1.0 / (faults.limiter_release_s * rate_hz));
    const double threshold = units::ratio_from_db(*faults.limiter_dbfs);
    double envelope = 0.0;
    for (double& x : samples) {
        const double size = std::abs(x);
        envelope = size > envelope ? envelope + up * (size - envelope) : envelope * down;
        if (envelope > threshold) x *= std::pow(envelope / threshold, 1.0 / faults.limiter_ratio - 1.0);
    }
}

void shelve(std::vector<double>& samples, double rate_hz, double boost_db) {
    const std::size_t size =
        spectrum::fast_fft_size(samples.size() + static_cast<std::size_t>(0.2 * rate_hz));
    auto bins = spectrum::forward_fft(samples, size);
    const double gain = units::ratio_from_db(boost_db);
    for (std::size_t k = 0; k < bins.size(); ++k) {
        const std::complex<double> jf(0.0, static_cast<double>(k) * rate_hz / static_cast<double>(size));
        bins[k] *= (jf + shelf_hz * gain) / (jf + shelf_hz);
    }
    auto out = spectrum::inverse_fft(bins, size);
    out.resize(samples.size());
    samples = std::move(out);
}

// A clock that runs fast by ppm, and faster by the second.
std::vector<double> by_another_clock(const std::vector<double>& samples, double rate_hz,
                                     const SimulatedFaults& faults) {
    if (faults.clock_drift_ppm_per_s == 0.0) {
        auto out =
            spectrum::resampled(samples, rate_hz, rate_hz * (1.0 + ppm * faults.clock_ppm), {32, 10.0, 1.0});
        out.resize(samples.size(), 0.0);
        return out;
    }
    // In pieces of 10 ms, each at its own rate; the joints shift by less than a thousandth of a frame.
    std::vector<double> out(samples.size(), 0.0);
    const auto piece = static_cast<std::size_t>(0.01 * rate_hz);
    constexpr std::size_t margin = 40;
    double lead = 0.0;  // frames that the input's clock is ahead
    for (std::size_t begin = 0; begin < out.size(); begin += piece) {
        const double t = static_cast<double>(begin) / rate_hz;
        const double offset = ppm * (faults.clock_ppm + faults.clock_drift_ppm_per_s * t);
        for (std::size_t n = begin; n < std::min(out.size(), begin + piece); ++n) {
            const double place = static_cast<double>(n) - lead;
            const auto centre = static_cast<long long>(std::floor(place));
            double sum = 0.0;
            for (long long k = centre - static_cast<long long>(margin) + 1;
                 k <= centre + static_cast<long long>(margin); ++k) {
                if (k < 0 || k >= static_cast<long long>(samples.size())) continue;
                const double x = std::numbers::pi * (place - static_cast<double>(k));
                const double along = (place - static_cast<double>(k)) / margin;
                const double window = 0.5 + 0.5 * std::cos(std::numbers::pi * along);
                sum += samples[static_cast<std::size_t>(k)] * window * (x == 0.0 ? 1.0 : std::sin(x) / x);
            }
            out[n] = sum;
            lead += offset;
        }
    }
    return out;
}

}  // namespace

void spoil_outputs(std::vector<std::vector<float>>& play, const SimulatedFaults& faults) {
    if (faults.outputs_swapped && play.size() >= 2) std::swap(play[0], play[1]);
    if (faults.mono_outputs) sum_all(play);
    silence(play, faults.dead_output);
}

void spoil_input(std::vector<float>& samples, double rate_hz, const SimulatedFaults& faults) {
    const bool clock = faults.clock_ppm != 0.0 || faults.clock_drift_ppm_per_s != 0.0;
    if (!clock && !faults.resample_to_hz && !faults.limiter_dbfs && faults.bass_boost_db == 0.0) return;
    std::vector<double> x(samples.begin(), samples.end());
    if (clock) x = by_another_clock(x, rate_hz, faults);
    if (faults.resample_to_hz) {
        const spectrum::ResampleQuality quality{faults.resampler_half_width, 8.0, 0.97};
        x = spectrum::resampled(spectrum::resampled(x, rate_hz, *faults.resample_to_hz, quality),
                                *faults.resample_to_hz, rate_hz, quality);
        x.resize(samples.size(), 0.0);
    }
    if (faults.bass_boost_db != 0.0) shelve(x, rate_hz, faults.bass_boost_db);
    if (faults.limiter_dbfs) limit(x, rate_hz, faults);
    for (std::size_t n = 0; n < samples.size(); ++n)
        samples[n] = static_cast<float>(std::clamp(x[n], -1.0, 1.0));
}

void spoil_inputs(std::vector<std::vector<float>>& recorded, const SimulatedFaults& faults) {
    if (faults.inputs_swapped && recorded.size() >= 2) std::swap(recorded[0], recorded[1]);
    if (faults.mono_inputs) sum_all(recorded);
    silence(recorded, faults.dead_input);
}

}  // namespace coldpin::rig
