#include "coldpin/spectrum/sine_fit.h"

#include <algorithm>
#include <cmath>
#include <numbers>

#include <Eigen/Dense>
#include <fmt/core.h>

#include "coldpin/spectrum/averaged_spectrum.h"
#include "coldpin/spectrum/phasor_sum.h"
#include "coldpin/units/error.h"

namespace coldpin::spectrum {

namespace {

constexpr double two_pi = 2.0 * std::numbers::pi;

double step_of(double frequency_hz, double rate_hz) {
    return two_pi * frequency_hz / rate_hz;
}

double mean_square(std::span<const double> samples) {
    double sum = 0.0;
    for (double x : samples) sum += x * x;
    return samples.empty() ? 0.0 : sum / static_cast<double>(samples.size());
}

// Normal equations of cos(w_k n), sin(w_k n) and 1, with every entry in closed form.
Eigen::MatrixXd gram(std::span<const double> steps, std::size_t count) {
    const auto tones = static_cast<Eigen::Index>(steps.size());
    Eigen::MatrixXd matrix(2 * tones + 1, 2 * tones + 1);
    for (Eigen::Index j = 0; j < tones; ++j) {
        for (Eigen::Index k = 0; k < tones; ++k) {
            const double a = steps[static_cast<std::size_t>(j)], b = steps[static_cast<std::size_t>(k)];
            const auto minus = geometric_sum(a - b, count), plus = geometric_sum(a + b, count);
            matrix(2 * j, 2 * k) = 0.5 * (minus.real() + plus.real());
            matrix(2 * j + 1, 2 * k + 1) = 0.5 * (minus.real() - plus.real());
            matrix(2 * j, 2 * k + 1) = 0.5 * (plus.imag() - minus.imag());
            matrix(2 * k + 1, 2 * j) = matrix(2 * j, 2 * k + 1);
        }
        const auto sum = geometric_sum(steps[static_cast<std::size_t>(j)], count);
        matrix(2 * j, 2 * tones) = matrix(2 * tones, 2 * j) = sum.real();
        matrix(2 * j + 1, 2 * tones) = matrix(2 * tones, 2 * j + 1) = sum.imag();
    }
    matrix(2 * tones, 2 * tones) = static_cast<double>(count);
    return matrix;
}

struct Solution {
    std::vector<std::complex<double>> phasors;
    double offset = 0.0;
    std::vector<double> residual;
};

Solution solve(std::span<const double> samples, std::span<const double> steps) {
    const auto tones = static_cast<Eigen::Index>(steps.size());
    Eigen::VectorXd right(2 * tones + 1);
    for (Eigen::Index k = 0; k < tones; ++k) {
        const std::complex<double> sum = phasor_sum(samples, steps[static_cast<std::size_t>(k)]);
        right(2 * k) = sum.real();
        right(2 * k + 1) = -sum.imag();
    }
    double total = 0.0;
    for (double x : samples) total += x;
    right(2 * tones) = total;
    const Eigen::VectorXd left = gram(steps, samples.size()).ldlt().solve(right);
    Solution solution;
    solution.residual.assign(samples.begin(), samples.end());
    for (Eigen::Index k = 0; k < tones; ++k) {
        // a cos + b sin = Re((a - i b) exp(i w n))
        solution.phasors.emplace_back(left(2 * k), -left(2 * k + 1));
        add_sine(solution.residual, -solution.phasors.back(), steps[static_cast<std::size_t>(k)]);
    }
    solution.offset = left(2 * tones);
    for (double& x : solution.residual) x -= solution.offset;
    return solution;
}

void require_fit_length(std::span<const double> samples, double rate_hz, double frequency_hz) {
    if (!(frequency_hz > 0.0) || !(frequency_hz < rate_hz / 2.0))
        throw UsageError(fmt::format("a sine of {:g} Hz cannot be fitted at a sample rate of {:g} Hz",
                                     frequency_hz, rate_hz));
    if (samples.size() < 8 || static_cast<double>(samples.size()) * frequency_hz < rate_hz)
        throw UsageError(fmt::format("too short: {} samples hold less than one period of {:g} Hz",
                                     samples.size(), frequency_hz));
}

SineFit as_fit(const Solution& solution, double frequency_hz) {
    SineFit fit;
    fit.frequency_hz = frequency_hz;
    fit.phasor = solution.phasors.front();
    fit.offset = solution.offset;
    fit.residual_mean_square = mean_square(solution.residual);
    fit.amplitude_std =
        std::sqrt(2.0 * fit.residual_mean_square / static_cast<double>(solution.residual.size()));
    return fit;
}

}  // namespace

SineFit fit_sine(std::span<const double> samples, double rate_hz, double frequency_hz) {
    require_fit_length(samples, rate_hz, frequency_hz);
    const double step = step_of(frequency_hz, rate_hz);
    return as_fit(solve(samples, std::span(&step, 1)), frequency_hz);
}

SineFit fit_sine_and_frequency(std::span<const double> samples, double rate_hz, double start_hz) {
    require_fit_length(samples, rate_hz, start_hz);
    const auto count = static_cast<double>(samples.size());
    const double centre = 0.5 * (count - 1.0);
    double frequency_hz = start_hz;
    std::vector<double> slanted(samples.size());
    for (int round = 0; round < 12; ++round) {
        const double step = step_of(frequency_hz, rate_hz);
        const Solution solution = solve(samples, std::span(&step, 1));
        // The derivative column is t * dx/dphi with t from the centre, where it is nearly orthogonal to the
        // amplitude columns; what is left of the residual along it is the frequency error.
        for (std::size_t n = 0; n < slanted.size(); ++n)
            slanted[n] = solution.residual[n] * (static_cast<double>(n) - centre);
        const std::complex<double> along = phasor_sum(slanted, step) * std::conj(solution.phasors.front());
        const double power = std::norm(solution.phasors.front());
        if (!(power > 0.0)) break;
        const double second_moment = count * (count * count - 1.0) / 12.0;
        const double correction = 2.0 * along.imag() / (power * second_moment);  // rad per sample
        const double change_hz = correction * rate_hz / two_pi;
        frequency_hz += change_hz;
        if (!(std::abs(frequency_hz - start_hz) < 1.5 * rate_hz / count)) break;
        if (std::abs(change_hz) < 1e-13 * rate_hz || round == 11) {
            const double final_step = step_of(frequency_hz, rate_hz);
            SineFit fit = as_fit(solve(samples, std::span(&final_step, 1)), frequency_hz);
            fit.frequency_std_hz =
                std::sqrt(6.0 * fit.residual_mean_square / (power * 0.25 * count * (count * count - 1.0))) *
                0.5 * rate_hz / std::numbers::pi;
            return fit;
        }
    }
    throw CannotMeasure(fmt::format("no steady tone near {:g} Hz: its frequency does not settle", start_hz));
}

MultiSineFit fit_sines(std::span<const double> samples, double rate_hz,
                       std::span<const double> frequencies_hz) {
    const double resolution_hz = rate_hz / static_cast<double>(std::max<std::size_t>(1, samples.size()));
    std::vector<double> steps, sorted(frequencies_hz.begin(), frequencies_hz.end());
    std::sort(sorted.begin(), sorted.end());
    for (std::size_t k = 0; k < sorted.size(); ++k) {
        require_fit_length(samples, rate_hz, sorted[k]);
        if (k > 0 && sorted[k] - sorted[k - 1] < resolution_hz)
            throw UsageError(
                fmt::format("too short to tell {:g} Hz from {:g} Hz: at least {:.3g} s are needed",
                            sorted[k - 1], sorted[k], 1.0 / std::max(sorted[k] - sorted[k - 1], 1e-9)));
    }
    for (double f : frequencies_hz) steps.push_back(step_of(f, rate_hz));
    const Solution solution = solve(samples, steps);
    return {solution.phasors, solution.offset, mean_square(solution.residual)};
}

double noise_density_near(std::span<const double> samples, double rate_hz, double frequency_hz,
                          double half_width_hz) {
    require_fit_length(samples, rate_hz, frequency_hz);
    const double step = step_of(frequency_hz, rate_hz);
    const Solution solution = solve(samples, std::span(&step, 1));
    WelchSettings settings;
    // About forty bins in the neighbourhood, so that the median means something, if the length allows.
    const double wanted = rate_hz / half_width_hz * 20.0;
    settings.segment = static_cast<std::size_t>(
        std::clamp(wanted, 64.0, static_cast<double>(std::max<std::size_t>(64, samples.size() / 2))));
    const AveragedSpectrum spectrum = averaged_spectrum(solution.residual, rate_hz, settings);
    const double lobe_hz = main_lobe_half_width_bins(spectrum.window) * spectrum.bin_hz;
    std::vector<double> beside;
    const double reach_hz = std::max(half_width_hz, 4.0 * lobe_hz);
    for (std::size_t k = 1; k + 1 < spectrum.density.size(); ++k) {
        const double distance = std::abs(static_cast<double>(k) * spectrum.bin_hz - frequency_hz);
        if (distance <= reach_hz && distance >= lobe_hz) beside.push_back(spectrum.density[k]);
    }
    if (beside.empty()) return mean_square(solution.residual) / (0.5 * rate_hz);
    std::nth_element(beside.begin(), beside.begin() + static_cast<std::ptrdiff_t>(beside.size() / 2),
                     beside.end());
    // Median to mean of a chi-square with nu degrees of freedom (Wilson and Hilferty 1931).
    const double shrink = std::pow(1.0 - 2.0 / (9.0 * spectrum.degrees_of_freedom), 3);
    return beside[beside.size() / 2] / shrink;
}

}  // namespace coldpin::spectrum
