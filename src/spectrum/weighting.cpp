#include "coldpin/spectrum/weighting.h"

#include <cmath>

namespace coldpin::spectrum {

namespace {

// Pole frequencies from the design values of IEC 61672-1 annex E: fr = 1000, fL = 10^1.5, fH = 10^3.9,
// fA = 10^2.45 Hz, D = sqrt(1/2).
constexpr double f1 = 20.598997057618316, f2 = 107.65264864304628, f3 = 737.86223073651840,
                 f4 = 12194.217147998012;

double c_response(double f) {
    const double f_2 = f * f;
    return f4 * f4 * f_2 / ((f_2 + f1 * f1) * (f_2 + f4 * f4));
}

double a_response(double f) {
    const double f_2 = f * f;
    return c_response(f) * f_2 / std::sqrt((f_2 + f2 * f2) * (f_2 + f3 * f3));
}

// The rational form in common use for the network of ITU-R BS.468-4; within 0.05 dB of the standard's table.
std::complex<double> itu468_shape(double f) {
    const double f_2 = f * f;
    const double h1 =
        ((-4.737338981378384e-24 * f_2 + 2.043828333606125e-15) * f_2 - 1.363894795463638e-7) * f_2 + 1.0;
    const double h2 =
        ((1.306612257412824e-19 * f_2 - 2.118150887518656e-11) * f_2 + 5.559488023498642e-4) * f;
    return 1.246332637532143e-4 * std::complex<double>(0.0, f) / std::complex<double>(h1, h2);
}

double itu468_response(double f) {
    return std::abs(itu468_shape(f));
}

}  // namespace

double weighting_gain(Weighting weighting, double frequency_hz) noexcept {
    static const double a_at_1k = a_response(1000.0), c_at_1k = c_response(1000.0),
                        itu_at_1k = itu468_response(1000.0);
    switch (weighting) {
        case Weighting::none:
            return 1.0;
        case Weighting::a:
            return a_response(frequency_hz) / a_at_1k;
        case Weighting::c:
            return c_response(frequency_hz) / c_at_1k;
        case Weighting::itu468:
            break;
    }
    return itu468_response(frequency_hz) / itu_at_1k;
}

std::complex<double> itu468_network(double frequency_hz) noexcept {
    static const double at_1k = itu468_response(1000.0);
    return itu468_shape(frequency_hz) / at_1k;
}

std::string_view weighting_name(Weighting weighting) noexcept {
    switch (weighting) {
        case Weighting::none:
            return "none";
        case Weighting::a:
            return "A";
        case Weighting::c:
            return "C";
        case Weighting::itu468:
            break;
    }
    return "468";
}

}  // namespace coldpin::spectrum
