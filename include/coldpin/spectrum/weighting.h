// Frequency weightings as amplitude factors, 1.0 (0 dB) at 1 kHz. Exact analogue formulas, to be applied in
// the frequency domain; no filter is designed, so there is no error near Nyquist. Pure, noexcept.
#pragma once

#include <complex>
#include <string_view>

namespace coldpin::spectrum {

enum class Weighting { none, a, c, itu468 };

// IEC 61672-1 annex E (A, C); ITU-R BS.468-4 as the usual rational form, offset for exactly 0 dB at 1 kHz.
double weighting_gain(Weighting weighting, double frequency_hz) noexcept;

// The 468 network with its phase, for what is read in time; its size is weighting_gain(Weighting::itu468).
std::complex<double> itu468_network(double frequency_hz) noexcept;

// "none", "A", "C", "468": the words of the JSON conditions.
std::string_view weighting_name(Weighting weighting) noexcept;

}  // namespace coldpin::spectrum
