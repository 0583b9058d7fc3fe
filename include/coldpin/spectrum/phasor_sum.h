// Sums against a rotating phasor: the inner loop of every synchronous detection here.
#pragma once

#include <complex>
#include <cstddef>
#include <span>
#include <vector>

namespace coldpin::spectrum {

// sum x[n] exp(-i step n), n from 0; exact to about 1e-13 of the sum of |x| whatever the length. Does not
// allocate.
std::complex<double> phasor_sum(std::span<const double> samples, double step_rad) noexcept;

// sum exp(i step n) for n = 0 ... count - 1, in closed form.
std::complex<double> geometric_sum(double step_rad, std::size_t count) noexcept;

// samples[n] += Re(phasor exp(i step n)).
void add_sine(std::span<double> samples, std::complex<double> phasor, double step_rad) noexcept;

// An angle per sample as a fraction of a turn in (-1, 1), reduced before it is multiplied: step * n mod 2 pi.
double reduced_angle(double step_rad, std::size_t n) noexcept;

}  // namespace coldpin::spectrum
