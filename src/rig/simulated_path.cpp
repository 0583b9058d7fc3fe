#include "simulated_path.h"

#include <algorithm>
#include <cmath>
#include <numbers>

#include "coldpin/spectrum/fft.h"
#include "coldpin/units/level.h"
#include "coldpin/units/physics.h"

namespace coldpin::rig {

namespace {

constexpr double two_pi = 2.0 * std::numbers::pi;
constexpr double reference_output_dbu = 4.0;  // where the preamp's distortion is stated
constexpr int hum_harmonics = 12;

// Amplitude ratio by which common mode turns into differential: flat, then rising.
std::complex<double> conversion(const SimulatedPreamp& preamp, double frequency_hz) {
    return units::ratio_from_db(-preamp.rejection_db) *
           std::complex<double>(1.0, frequency_hz / preamp.rejection_corner_hz);
}

// Straight up to nine tenths of the limit, then rounded into it.
double clipped(double volts, double limit) {
    const double size = std::abs(volts) / limit;
    if (size <= 0.9) return volts;
    return std::copysign(limit * (0.9 + 0.1 * std::tanh((size - 0.9) / 0.1)), volts);
}

}  // namespace

std::complex<double> true_preamp_gain(const SimulatedPreamp& preamp, double gain_db, double frequency_hz) {
    const std::complex<double> jf(0.0, frequency_hz);
    const std::complex<double> corners =
        jf / (preamp.lower_corner_hz + jf) * (preamp.upper_corner_hz / (preamp.upper_corner_hz + jf));
    return corners * units::ratio_from_db(gain_db) * static_cast<double>(preamp.polarity);
}

double true_rejection_db(const SimulatedPreamp& preamp, double frequency_hz) {
    return -units::db_from_ratio(std::abs(conversion(preamp, frequency_hz)));
}

double true_input_noise_v(const SimulatedPreamp& preamp, double source_ohms, double temperature_k,
                          double frequency_hz) {
    const double voltage = preamp.input_noise_nv * 1e-9,
                 current = preamp.input_noise_pa * 1e-12 * source_ohms;
    const double amplifier = (voltage * voltage + current * current) *
                             (1.0 + (frequency_hz > 0.0 ? preamp.flicker_corner_hz / frequency_hz : 0.0));
    const double thermal = units::thermal_noise_density_v(source_ohms, temperature_k);
    return std::sqrt(amplifier + thermal * thermal);
}

void add_hum(std::vector<double>& samples, double fundamental_rms, double slope_db,
             const SimulatedInterface& interface, double start_s, double rate_hz) {
    for (int number = 1; number <= hum_harmonics; ++number) {
        const bool odd = number % 2 == 1;
        const int steps = (number - 1) / 2;
        const double level_db = slope_db * steps - (odd ? 0.0 : 12.0);
        const double amplitude = fundamental_rms * std::numbers::sqrt2 * units::ratio_from_db(level_db);
        // Phase of a linearly drifting mains: f t + d t^2 / 2. A rotating phasor whose turn itself turns.
        const double f = interface.mains_hz + interface.mains_drift_hz_per_s * start_s,
                     drift = interface.mains_drift_hz_per_s;
        std::complex<double> phasor =
            std::polar(amplitude, two_pi * std::fmod(number * f * start_s, 1.0) + number);
        std::complex<double> turn = std::polar(1.0, two_pi * number * (f + 0.5 * drift / rate_hz) / rate_hz);
        const std::complex<double> bend = std::polar(1.0, two_pi * number * drift / (rate_hz * rate_hz));
        for (double& x : samples) {
            x += phasor.real();
            phasor *= turn;
            turn *= bend;
        }
    }
}

std::vector<double> through_preamp(const SimulatedSetup& simulated, const SimulatedPreamp& preamp,
                                   const Setup& setup, const PathState& state,
                                   const std::vector<double>& differential_v,
                                   const std::vector<double>& common_mode_v, double rate_hz,
                                   Gaussian& noise) {
    const std::size_t frames = differential_v.size();
    // A second of silence behind, so that the tail of the lowest corner does not come round to the beginning.
    const std::size_t size = spectrum::fast_fft_size(frames + static_cast<std::size_t>(rate_hz));
    const auto& faults = simulated.faults;
    const double leg = faults.cold_leg_open ? 0.5 : 1.0;  // half of a balanced drive is left
    std::vector<double> hiss(frames), pickup(frames, 0.0);
    for (double& x : hiss) x = noise() * std::sqrt(0.5 * rate_hz);  // density 1 V/sqrt(Hz), shaped below
    add_hum(pickup, units::volts_rms_from_dbu(preamp.hum_input_dbu), preamp.hum_harmonic_slope_db,
            simulated.interface, state.start_s, rate_hz);
    for (std::size_t n = 0; n < frames; ++n) pickup[n] += leg * differential_v[n];

    auto bins = spectrum::forward_fft(pickup, size);
    const auto hiss_bins = spectrum::forward_fft(hiss, size);
    const auto common_bins = spectrum::forward_fft(common_mode_v, size);
    const double gain_db =
        state.gain_db + (state.second_channel ? preamp.second_channel_gain_offset_db : 0.0);
    const double temperature_k = units::celsius_zero_k + setup.temperature_c;
    for (std::size_t k = 0; k < bins.size(); ++k) {
        const double f = std::max(static_cast<double>(k), 0.5) * rate_hz / static_cast<double>(size);
        const std::complex<double> converted = faults.cold_leg_open ? 1.0 : conversion(preamp, f);
        bins[k] += common_bins[k] * converted +
                   hiss_bins[k] * true_input_noise_v(preamp, setup.fixture.source_ohms, temperature_k, f);
        bins[k] *= k == 0 ? 0.0 : true_preamp_gain(preamp, gain_db, f) * (faults.legs_swapped ? -1.0 : 1.0);
    }
    auto volts = spectrum::inverse_fft(bins, size);
    volts.resize(frames);

    const double stated_peak = units::volts_rms_from_dbu(reference_output_dbu) * std::numbers::sqrt2;
    const double second = 2.0 * units::ratio_from_db(preamp.second_harmonic_db) / stated_peak;
    const double third = 4.0 * units::ratio_from_db(preamp.third_harmonic_db) / (stated_peak * stated_peak);
    const double limit = units::volts_rms_from_dbu(preamp.max_output_dbu) * std::numbers::sqrt2;
    for (double& v : volts) {
        const double bounded = std::clamp(v, -1.2 * limit, 1.2 * limit);  // the polynomial holds up to there
        v = clipped(bounded + second * bounded * bounded + third * bounded * bounded * bounded, limit);
    }
    return volts;
}

}  // namespace coldpin::rig
