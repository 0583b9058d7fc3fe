// Quantiles and intervals for estimates (Boost.Math).
#pragma once

#include <vector>

namespace coldpin::spectrum {

double chi_square_quantile(double probability, double degrees_of_freedom);
double student_t_quantile(double probability, double degrees_of_freedom);

// Expanded uncertainty (k = 2) in dB of a power estimate with a relative standard deviation:
// the larger half of the interval 10 lg(1 +- 2 r), so that it stays honest for large r (r < 0.5 required;
// beyond that 6 dB and more is returned, never infinity).
double power_uncertainty_db(double relative_std);

// The same for an amplitude with a relative standard deviation: 20 lg.
double amplitude_uncertainty_db(double relative_std);

// The middle value (the upper one of two); 0 for none.
double median(std::vector<double> values);

// Root of the sum of squares.
double combine(double a, double b);
double combine(double a, double b, double c);

}  // namespace coldpin::spectrum
