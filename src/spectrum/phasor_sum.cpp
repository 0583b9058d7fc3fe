#include "coldpin/spectrum/phasor_sum.h"

#include <algorithm>
#include <array>
#include <cmath>
#include <numbers>

namespace coldpin::spectrum {

namespace {

constexpr std::size_t lanes = 8;       // independent phasors, so that the compiler can use vectors
constexpr std::size_t restart = 1024;  // samples between exact restarts: rounding grows with the turns

}  // namespace

double reduced_angle(double step_rad, std::size_t n) noexcept {
    const double turns = step_rad / (2.0 * std::numbers::pi);
    // n is split so that each product is exact to a turn's 1e-16 even after an hour at 192 kHz.
    const auto high = static_cast<double>(n >> 16U), low = static_cast<double>(n & 0xFFFFU);
    const double coarse = std::fmod(std::fmod(turns * 65536.0, 1.0) * high, 1.0);
    return 2.0 * std::numbers::pi * std::fmod(coarse + std::fmod(turns * low, 1.0), 1.0);
}

std::complex<double> phasor_sum(std::span<const double> samples, double step_rad) noexcept {
    const std::complex<double> turn = std::polar(1.0, -step_rad * static_cast<double>(lanes));
    const double turn_re = turn.real(), turn_im = turn.imag();
    std::complex<double> total = 0.0;
    for (std::size_t begin = 0; begin < samples.size(); begin += restart) {
        const auto block = samples.subspan(begin, std::min(restart, samples.size() - begin));
        std::array<double, lanes> re{}, im{}, sum_re{}, sum_im{};
        for (std::size_t lane = 0; lane < lanes; ++lane) {
            re[lane] = std::cos(step_rad * static_cast<double>(lane));
            im[lane] = -std::sin(step_rad * static_cast<double>(lane));
        }
        std::size_t n = 0;
        for (; n + lanes <= block.size(); n += lanes) {
            for (std::size_t lane = 0; lane < lanes; ++lane) {
                sum_re[lane] += block[n + lane] * re[lane];
                sum_im[lane] += block[n + lane] * im[lane];
                const double next = re[lane] * turn_re - im[lane] * turn_im;
                im[lane] = re[lane] * turn_im + im[lane] * turn_re;
                re[lane] = next;
            }
        }
        std::complex<double> sum = 0.0;
        for (std::size_t lane = 0; lane < lanes; ++lane)
            sum += std::complex<double>(sum_re[lane], sum_im[lane]);
        for (std::size_t lane = 0; n < block.size(); ++n, ++lane)
            sum += block[n] * std::complex<double>(re[lane], im[lane]);
        total += sum * std::polar(1.0, -reduced_angle(step_rad, begin));
    }
    return total;
}

std::complex<double> geometric_sum(double step_rad, std::size_t count) noexcept {
    const double half = 0.5 * step_rad, n = static_cast<double>(count);
    const double below = std::sin(half);
    if (std::abs(below) < 1e-14) return n;
    return std::polar(1.0, half * (n - 1.0)) * (std::sin(half * n) / below);
}

void add_sine(std::span<double> samples, std::complex<double> phasor, double step_rad) noexcept {
    const std::complex<double> turn = std::polar(1.0, step_rad * static_cast<double>(lanes));
    const double turn_re = turn.real(), turn_im = turn.imag();
    for (std::size_t begin = 0; begin < samples.size(); begin += restart) {
        const auto block = samples.subspan(begin, std::min(restart, samples.size() - begin));
        const std::complex<double> start = phasor * std::polar(1.0, reduced_angle(step_rad, begin));
        std::array<double, lanes> re{}, im{};
        for (std::size_t lane = 0; lane < lanes; ++lane) {
            const std::complex<double> at = start * std::polar(1.0, step_rad * static_cast<double>(lane));
            re[lane] = at.real();
            im[lane] = at.imag();
        }
        std::size_t n = 0;
        for (; n + lanes <= block.size(); n += lanes) {
            for (std::size_t lane = 0; lane < lanes; ++lane) {
                block[n + lane] += re[lane];
                const double next = re[lane] * turn_re - im[lane] * turn_im;
                im[lane] = re[lane] * turn_im + im[lane] * turn_re;
                re[lane] = next;
            }
        }
        for (std::size_t lane = 0; n < block.size(); ++n, ++lane) block[n] += re[lane];
    }
}

}  // namespace coldpin::spectrum
