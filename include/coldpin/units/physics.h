// Thermal noise of a resistance (Johnson and Nyquist 1928) and the constants it needs.
#pragma once

#include <cmath>

namespace coldpin::units {

inline constexpr double boltzmann_j_per_k = 1.380649e-23;       // exact (SI Brochure, 9th edition)
inline constexpr double noise_reference_temperature_k = 290.0;  // T0 of the noise figure
inline constexpr double celsius_zero_k = 273.15;

// Volts RMS per sqrt(Hz) of a resistance in ohm at a temperature in kelvin: sqrt(4 k T R).
inline double thermal_noise_density_v(double resistance_ohms, double temperature_k) noexcept {
    return std::sqrt(4.0 * boltzmann_j_per_k * temperature_k * resistance_ohms);
}

// Volts RMS of a resistance over a bandwidth in Hz.
inline double thermal_noise_volts(double resistance_ohms, double temperature_k,
                                  double bandwidth_hz) noexcept {
    return thermal_noise_density_v(resistance_ohms, temperature_k) * std::sqrt(bandwidth_hz);
}

}  // namespace coldpin::units
