#include "steady_tone.h"

#include <algorithm>
#include <array>
#include <cmath>
#include <cstddef>
#include <numbers>

#include <Eigen/Dense>

namespace coldpin::measure {

namespace {

constexpr double two_pi = 2.0 * std::numbers::pi;
constexpr std::size_t parts = 7;      // quarters, half overlapping
constexpr std::size_t restart = 512;  // samples between exact angles: rounding grows with the turns

double turn_of(double step, std::size_t n) {
    return two_pi * std::fmod(step / two_pi * static_cast<double>(n), 1.0);
}

std::complex<double> geometric(double step, std::size_t count) {
    const double n = static_cast<double>(count), below = std::sin(0.5 * step);
    if (std::abs(below) < 1e-14) return n;
    return std::polar(1.0, 0.5 * step * (n - 1.0)) * (std::sin(0.5 * step * n) / below);
}

// sum w[n] exp(i step n) for w[n] = (1 - cos(2 pi n / N)) / 2.
std::complex<double> window_sum(double step, std::size_t count) {
    const double bin = two_pi / static_cast<double>(count);
    return 0.5 * geometric(step, count) -
           0.25 * (geometric(step + bin, count) + geometric(step - bin, count));
}

struct Sums {
    std::complex<double> tone;  // sum w x exp(i step n)
    double plain = 0.0;         // sum w x
};

Sums weighted_sums(std::span<const double> samples, double step) {
    const double bin = two_pi / static_cast<double>(samples.size());
    const std::complex<double> turn = std::polar(1.0, step), roll = std::polar(1.0, bin);
    Sums sums;
    for (std::size_t begin = 0; begin < samples.size(); begin += restart) {
        std::complex<double> phasor = std::polar(1.0, turn_of(step, begin));
        std::complex<double> window = std::polar(1.0, turn_of(bin, begin));
        double re = 0.0, im = 0.0, plain = 0.0;
        for (std::size_t n = begin; n < std::min(samples.size(), begin + restart); ++n) {
            const double x = samples[n] * 0.5 * (1.0 - window.real());
            re += x * phasor.real();
            im += x * phasor.imag();
            plain += x;
            phasor *= turn;
            window *= roll;
        }
        sums.tone += std::complex<double>(re, im);
        sums.plain += plain;
    }
    return sums;
}

struct Line {
    double slope = 0.0;
    double left_over = 0.0;  // standard deviation about the line
    double moment = 0.0;     // sum of squared distances along the axis
};

Line straight_line(const std::array<double, parts>& x, const std::array<double, parts>& y) {
    double mean_x = 0.0, mean_y = 0.0;
    for (std::size_t b = 0; b < parts; ++b) {
        mean_x += x[b] / parts;
        mean_y += y[b] / parts;
    }
    Line line;
    double product = 0.0, squares = 0.0;
    for (std::size_t b = 0; b < parts; ++b) {
        line.moment += (x[b] - mean_x) * (x[b] - mean_x);
        product += (x[b] - mean_x) * (y[b] - mean_y);
    }
    line.slope = product / line.moment;
    for (std::size_t b = 0; b < parts; ++b) {
        const double rest = y[b] - mean_y - line.slope * (x[b] - mean_x);
        squares += rest * rest;
    }
    line.left_over = std::sqrt(squares / (parts - 2));
    return line;
}

}  // namespace

std::complex<double> hann_weighted_sine(std::span<const double> samples, double rate_hz,
                                        double frequency_hz) {
    const double step = two_pi * frequency_hz / rate_hz;
    const std::complex<double> once = window_sum(step, samples.size()),
                               twice = window_sum(2.0 * step, samples.size());
    const double whole = 0.5 * static_cast<double>(samples.size());
    Eigen::Matrix3d normal;
    normal << 0.5 * (whole + twice.real()), 0.5 * twice.imag(), once.real(),  //
        0.5 * twice.imag(), 0.5 * (whole - twice.real()), once.imag(),        //
        once.real(), once.imag(), whole;
    const Sums sums = weighted_sums(samples, step);
    const Eigen::Vector3d right(sums.tone.real(), sums.tone.imag(), sums.plain);
    const Eigen::Vector3d solution = normal.ldlt().solve(right);
    return {solution(0), -solution(1)};
}

SteadyTone follow_tone(std::span<const double> samples, double rate_hz, double start_hz) {
    const std::size_t length = samples.size() / 4, hop = length / 2;
    SteadyTone tone;
    tone.frequency_hz = start_hz;
    tone.part_s = static_cast<double>(length) / rate_hz;
    std::array<double, parts> times{}, phases{}, amplitudes{};
    // The first round finds the frequency to a hundredth of what it was off; more follow for the last digits.
    for (int round = 0; round < 4; ++round) {
        const double step = two_pi * tone.frequency_hz / rate_hz;
        std::complex<double> sum = 0.0;
        double sizes = 0.0;
        for (std::size_t b = 0; b < parts; ++b) {
            const auto z = hann_weighted_sine(samples.subspan(b * hop, length), rate_hz, tone.frequency_hz) *
                           std::polar(1.0, -turn_of(step, b * hop));
            times[b] = static_cast<double>(b * hop) / rate_hz;
            phases[b] = std::arg(z);
            if (b > 0) phases[b] -= two_pi * std::round((phases[b] - phases[b - 1]) / two_pi);
            amplitudes[b] = std::abs(z);
            sum += z;
            sizes += amplitudes[b];
        }
        tone.coherence = sizes > 0.0 ? std::abs(sum) / sizes : 0.0;
        const Line line = straight_line(times, phases);
        // Halves that overlap are correlated: the slope scatters about a fifth more than from independent
        // ones.
        tone.frequency_std_hz = 1.2 * line.left_over / std::sqrt(line.moment) / two_pi;
        const double change_hz = line.slope / two_pi;
        tone.frequency_hz += change_hz;
        if (std::abs(change_hz) < 0.1 * tone.frequency_std_hz + 1e-12 * start_hz) break;
    }
    double mean = 0.0, squares = 0.0;
    for (double a : amplitudes) mean += a / parts;
    for (double a : amplitudes) squares += (a - mean) * (a - mean);
    tone.amplitude_scatter = std::sqrt(squares / (parts - 1));
    tone.phasor = hann_weighted_sine(samples, rate_hz, tone.frequency_hz);
    return tone;
}

}  // namespace coldpin::measure
