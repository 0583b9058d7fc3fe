#include "coldpin/spectrum/statistics.h"

#include <algorithm>
#include <cmath>

#include <boost/math/distributions/chi_squared.hpp>
#include <boost/math/distributions/students_t.hpp>

namespace coldpin::spectrum {

double chi_square_quantile(double probability, double degrees_of_freedom) {
    return boost::math::quantile(boost::math::chi_squared(degrees_of_freedom), probability);
}

double student_t_quantile(double probability, double degrees_of_freedom) {
    return boost::math::quantile(boost::math::students_t(degrees_of_freedom), probability);
}

double power_uncertainty_db(double relative_std) {
    const double spread = 2.0 * std::max(0.0, relative_std);
    // Downwards the interval is the longer half; near zero power it has no end, and 40 dB says as much.
    return -10.0 * std::log10(std::max(1.0 - spread, 1e-4));
}

double amplitude_uncertainty_db(double relative_std) {
    const double spread = 2.0 * std::max(0.0, relative_std);
    return -20.0 * std::log10(std::max(1.0 - spread, 1e-2));
}

double combine(double a, double b) {
    return std::hypot(a, b);
}
double combine(double a, double b, double c) {
    return std::hypot(a, b, c);
}

double median(std::vector<double> values) {
    if (values.empty()) return 0.0;
    const auto middle = values.begin() + static_cast<std::ptrdiff_t>(values.size() / 2);
    std::nth_element(values.begin(), middle, values.end());
    return *middle;
}

}  // namespace coldpin::spectrum
