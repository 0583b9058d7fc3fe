#include "coldpin/spectrum/window.h"

#include <algorithm>
#include <cmath>
#include <numbers>
#include <span>

namespace coldpin::spectrum {

namespace {

// Signs are in the sum: w = c0 - c1 cos z + c2 cos 2z - ...
constexpr double rectangular[] = {1.0};
constexpr double hann[] = {0.5, 0.5};
constexpr double blackman_harris[] = {0.35875, 0.48829, 0.14128, 0.01168};
constexpr double hft90d[] = {1.0, 1.942604, 1.340318, 0.440811, 0.043097};
constexpr double hft144d[] = {1.0, 1.96760033, 1.57983607, 0.81123644, 0.22583558, 0.02773848, 0.00090360};

std::span<const double> coefficients(Window window) {
    switch (window) {
        case Window::rectangular:
            return rectangular;
        case Window::hann:
            return hann;
        case Window::blackman_harris:
            return blackman_harris;
        case Window::flat_top_hft90d:
            return hft90d;
        case Window::flat_top_hft144d:
            break;
    }
    return hft144d;
}

}  // namespace

std::vector<double> window_samples(Window window, std::size_t size) {
    const auto terms = coefficients(window);
    std::vector<double> samples(size);
    for (std::size_t j = 0; j < size; ++j) {
        double sum = 0.0, sign = 1.0;
        for (std::size_t m = 0; m < terms.size(); ++m, sign = -sign) {
            // The product is reduced as a whole number, so that late samples keep their digits.
            const auto turn = static_cast<double>((m * j) % size) / static_cast<double>(size);
            sum += sign * terms[m] * std::cos(2.0 * std::numbers::pi * turn);
        }
        samples[j] = sum;
    }
    return samples;
}

double noise_bandwidth_bins(const std::vector<double>& window) {
    double sum = 0.0, squares = 0.0;
    for (double w : window) {
        sum += w;
        squares += w * w;
    }
    return static_cast<double>(window.size()) * squares / (sum * sum);
}

double coherent_gain(const std::vector<double>& window) {
    double sum = 0.0, peak = 0.0;
    for (double w : window) {
        sum += w;
        peak = std::max(peak, std::abs(w));
    }
    return sum / static_cast<double>(window.size()) / peak;
}

double main_lobe_half_width_bins(Window window) {
    return static_cast<double>(coefficients(window).size());
}

}  // namespace coldpin::spectrum
