#include "coldpin/spectrum/quasi_peak.h"

#include <algorithm>
#include <cmath>
#include <map>
#include <mutex>
#include <numbers>

#include "coldpin/spectrum/fft.h"
#include "coldpin/spectrum/weighting.h"
#include "coldpin/units/error.h"

namespace coldpin::spectrum {

namespace {

constexpr double fast_charge_s = 1.40577e-3, fast_discharge_s = 0.322367;
constexpr double slow_charge_s = 0.161291, slow_discharge_s = 0.710732;
constexpr double least_detector_rate_hz = 88000.0;  // twice the usual rates: four samples a period at the end
// Of the network's transforms: small enough to stay in the cache and out of the system's page tables, which
// is ten times faster than 16384.
constexpr std::size_t block = 4096;
constexpr std::size_t margin = 512;  // the network's impulse response has died by then
constexpr double reading_s = 0.1;

double charge(double constant_s, double rate_hz) {
    return 1.0 - std::exp(-1.0 / (constant_s * rate_hz));
}
double hold(double constant_s, double rate_hz) {
    return std::exp(-1.0 / (constant_s * rate_hz));
}

// Beyond its ends a recording goes on turned about its last value: cut off to silence, hum or an offset would
// be a step, and the network would make a click of it.
double continued(std::span<const double> samples, long long at) {
    const auto count = static_cast<long long>(samples.size());
    const auto value = [&](long long n) {
        return samples[static_cast<std::size_t>(std::clamp(n, 0LL, count - 1))];
    };
    if (at < 0) return 2.0 * value(0) - value(-at);
    return at < count ? value(at) : 2.0 * value(count - 1) - value(2 * (count - 1) - at);
}

// What a steady sine of 1 kHz and RMS 1 reads before it is scaled, by playing it to the detector once per
// rate.
double steady_reading(double rate_hz, const auto& run) {
    static std::mutex mutex;
    static std::map<double, double> known;
    const std::scoped_lock lock(mutex);
    const auto found = known.find(rate_hz);
    if (found != known.end()) return found->second;
    return known[rate_hz] = run();
}

}  // namespace

QuasiPeakDetector::QuasiPeakDetector(double rate_hz)
    : fast_charge_(charge(fast_charge_s, rate_hz)),
      fast_hold_(hold(fast_discharge_s, rate_hz)),
      slow_charge_(charge(slow_charge_s, rate_hz)),
      slow_hold_(hold(slow_discharge_s, rate_hz)) {
    scale_ = 1.0 / steady_reading(rate_hz, [&] {
                 constexpr double settled_s = 6.0;
                 const auto frames = static_cast<std::size_t>(settled_s * rate_hz);
                 for (std::size_t n = 0; n < frames; ++n)
                     take(std::numbers::sqrt2 *
                          std::sin(2.0 * std::numbers::pi *
                                   std::fmod(1000.0 * static_cast<double>(n) / rate_hz, 1.0)));
                 const double read = slow_;
                 fast_ = slow_ = 0.0;
                 return read;
             });
}

QuasiPeakReading quasi_peak_468(std::span<const double> samples, double rate_hz, double low_hz,
                                double high_hz) {
    if (!(rate_hz >= 32000.0))
        throw UsageError("the quasi-peak reading needs a sample rate of 32 kHz or more");
    if (static_cast<double>(samples.size()) < reading_s * rate_hz)
        throw UsageError("the quasi-peak reading needs a tenth of a second at least");
    const std::size_t factor =
        std::max<std::size_t>(1, static_cast<std::size_t>(std::ceil(least_detector_rate_hz / rate_hz)));
    std::vector<std::complex<double>> network(block / 2 + 1);
    for (std::size_t k = 0; k < network.size(); ++k) {
        const double hz = static_cast<double>(k) * rate_hz / static_cast<double>(block);
        network[k] = hz >= low_hz && hz <= high_hz ? itu468_network(hz) * static_cast<double>(factor) : 0.0;
    }
    QuasiPeakDetector detector(rate_hz * static_cast<double>(factor));
    QuasiPeakReading reading;
    const auto stretch = static_cast<std::size_t>(reading_s * rate_hz) * factor;
    std::size_t in_stretch = 0;
    double highest = 0.0;
    std::vector<double> piece(block);
    constexpr std::size_t hop = block - 2 * margin;
    for (std::size_t begin = 0; begin < samples.size(); begin += hop) {
        // A margin before and behind.
        for (std::size_t n = 0; n < block; ++n)
            piece[n] = continued(samples, static_cast<long long>(begin + n) - static_cast<long long>(margin));
        auto bins = forward_fft(piece);
        for (std::size_t k = 0; k < bins.size(); ++k) bins[k] *= network[k];
        bins.resize(factor * block / 2 + 1, 0.0);
        const auto weighted = inverse_fft(bins, factor * block);
        const std::size_t frames = std::min(hop, samples.size() - begin) * factor;
        for (std::size_t n = 0; n < frames; ++n) {
            detector.take(weighted[margin * factor + n]);
            highest = std::max(highest, detector.reading());
            if (++in_stretch == stretch) {
                reading.readings.push_back(highest);
                reading.highest = std::max(reading.highest, highest);
                highest = 0.0;
                in_stretch = 0;
            }
        }
    }
    reading.highest = std::max(reading.highest, highest);
    return reading;
}

}  // namespace coldpin::spectrum
