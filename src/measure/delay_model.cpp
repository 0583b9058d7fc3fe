#include "delay_model.h"

#include <algorithm>
#include <array>
#include <cmath>
#include <numbers>
#include <vector>

#include <Eigen/Dense>

#include "coldpin/spectrum/statistics.h"
#include "coldpin/units/error.h"
#include "coldpin/units/frequency_grid.h"

namespace coldpin::measure {

namespace {

constexpr double two_pi = 2.0 * std::numbers::pi;
constexpr double method_relative = 3e-5;  // of the local fit itself, where noise is nil

struct Row {
    double omega;                // in rad per frame
    std::complex<double> value;  // logarithm of the response, turned back by the first delay
    double weight;               // 1 / variance of either part
};

// K exp(-i w t) / (1 + b1 s + b2 s^2) / (1 + a1 / s + a2 / s^2), s = i w in rad per frame. Unknowns: ln K, t,
// a1, b1 and for the second order a2, b2.
using Unknowns = Eigen::Matrix<double, 6, 1>;
using Normal = Eigen::Matrix<double, 6, 6>;

struct Model {
    std::complex<double> value;
    std::array<std::complex<double>, 6> slope;
};

Model model_at(const Unknowns& u, double omega) {
    const std::complex<double> s(0.0, omega);
    const std::complex<double> low = 1.0 + u(3) * s + u(5) * s * s, high = 1.0 + u(2) / s + u(4) / (s * s);
    return {u(0) - s * u(1) - std::log(low) - std::log(high),
            {1.0, -s, -1.0 / (s * high), -s / low, -1.0 / (s * s * high), -s * s / low}};
}

double weigh(const std::vector<Row>& rows, const Unknowns& u, Normal* normal, Unknowns* right) {
    double squares = 0.0;
    if (normal != nullptr) {
        normal->setZero();
        right->setZero();
    }
    for (const Row& row : rows) {
        const Model model = model_at(u, row.omega);
        const std::complex<double> difference = row.value - model.value;
        const double re = difference.real(), im = std::remainder(difference.imag(), two_pi);
        squares += row.weight * (re * re + im * im);
        if (normal == nullptr) continue;
        Unknowns slope_re, slope_im;
        for (int i = 0; i < 6; ++i) {
            slope_re(i) = model.slope[static_cast<std::size_t>(i)].real();
            slope_im(i) = model.slope[static_cast<std::size_t>(i)].imag();
        }
        *normal += row.weight * (slope_re * slope_re.transpose() + slope_im * slope_im.transpose());
        *right += row.weight * (slope_re * re + slope_im * im);
    }
    return squares;
}

struct Fitted {
    Unknowns unknowns;
    double left_over = 0.0;  // per degree of freedom: 1 when noise explains it
    double delay_variance = 0.0;
};

// A low-pass at the end of its range (none at all) looks like delay to first order and shows in the magnitude
// only to second: it is left out of the covariance, and the largest one that the magnitude could hide is
// added instead.
double delay_variance(const std::vector<Row>& rows, const Normal& normal, const Fitted& fitted, int free) {
    double weights = 0.0, moments = 0.0;
    for (const Row& row : rows) {
        weights += row.weight;
        moments += row.weight * row.omega * row.omega;
    }
    const double magnitude_std = 1.0 / std::sqrt(weights), omega_squared = moments / weights;
    const double low_pass = fitted.unknowns(3);
    const bool hidden_low_pass = free == 4 && 0.5 * omega_squared * low_pass * low_pass < 4.0 * magnitude_std;
    std::vector<int> kept;
    for (int i = 0; i < free; ++i)
        if (i < 2 || (fitted.unknowns(i) > 0.0 && !(i == 3 && hidden_low_pass))) kept.push_back(i);
    const auto size = static_cast<Eigen::Index>(kept.size());
    Eigen::MatrixXd reduced(size, size);
    for (Eigen::Index i = 0; i < size; ++i)
        for (Eigen::Index j = 0; j < size; ++j)
            reduced(i, j) = normal(kept[static_cast<std::size_t>(i)], kept[static_cast<std::size_t>(j)]);
    const Eigen::MatrixXd inverse = reduced.ldlt().solve(Eigen::MatrixXd::Identity(size, size));
    double variance = std::max(inverse(1, 1), 0.0) * std::max(1.0, fitted.left_over);
    // (b/2)^2 with w^2 b^2 / 2 = 4 standard deviations of the magnitude.
    if (hidden_low_pass) variance += 2.0 * magnitude_std / omega_squared;
    return variance;
}

// Levenberg and Marquardt. `free` unknowns are fitted, the rest stay where they are (zero).
Fitted fit_order(const std::vector<Row>& rows, const Unknowns& start, int free) {
    Fitted fitted{start, 0.0, 0.0};
    double damping = 1e-3;
    Normal normal;
    Unknowns right;
    double squares = weigh(rows, fitted.unknowns, &normal, &right);
    for (int round = 0; round < 100 && damping < 1e10; ++round) {
        Eigen::MatrixXd damped = normal.topLeftCorner(free, free);
        damped.diagonal() *= 1.0 + damping;
        damped.diagonal().array() += 1e-300;
        Unknowns trial = fitted.unknowns;
        trial.head(free) += damped.ldlt().solve(right.head(free));
        for (int i = 2; i < 6; ++i) trial(i) = std::max(trial(i), 0.0);
        const double trial_squares = weigh(rows, trial, nullptr, nullptr);
        if (!(trial_squares < squares)) {
            damping *= 6.0;
            continue;
        }
        const bool settled = squares - trial_squares < 1e-9 * squares;
        fitted.unknowns = trial;
        damping = std::max(damping * 0.2, 1e-12);
        squares = weigh(rows, fitted.unknowns, &normal, &right);
        if (settled) break;
    }
    fitted.left_over = squares / static_cast<double>(2 * rows.size() - static_cast<std::size_t>(free));
    fitted.delay_variance = delay_variance(rows, normal, fitted, free);
    return fitted;
}

// Polarity and a first delay: the turn back that makes the response line up best along the real axis.
struct Start {
    double delay_s = 0.0;
    int polarity = 1;
    double confidence = 0.0;
};

Start line_up(const std::vector<double>& grid, const std::vector<TransferPoint>& points, double rate_hz) {
    Start best;
    double best_sum = -1.0, total = 0.0;
    for (const auto& point : points) total += std::abs(point.value);
    for (int i = -150; i <= 150; ++i) {
        const double delay_s = 0.01 * i / rate_hz;
        std::complex<double> sum = 0.0;
        for (std::size_t k = 0; k < grid.size(); ++k)
            sum += points[k].value * std::polar(1.0, two_pi * grid[k] * delay_s);
        if (std::abs(sum.real()) > best_sum) {
            best_sum = std::abs(sum.real());
            best = {delay_s, sum.real() < 0.0 ? -1 : 1, total > 0.0 ? std::abs(sum.real()) / total : 0.0};
        }
    }
    return best;
}

}  // namespace

DelayFit fit_delay(const Transfer& transfer) {
    // Evenly spaced: a delay shows at high frequencies, where a logarithmic grid has few points.
    std::vector<double> grid;
    if (transfer.is_tones()) {
        grid = transfer.tones_hz;
    } else {
        constexpr int points = 300;
        const double low = transfer.low_hz * 1.05, high = transfer.high_hz * 0.97;
        for (int i = 0; i < points; ++i) grid.push_back(low + (high - low) * i / (points - 1));
        for (double hz : units::logarithmic_grid(low, std::min(high, 40.0 * low), 6)) grid.push_back(hz);
    }
    std::vector<TransferPoint> values;
    values.reserve(grid.size());
    for (double hz : grid) values.push_back(transfer.at(hz));
    const Start start = line_up(grid, values, transfer.rate_hz);

    std::vector<Row> rows;
    for (std::size_t k = 0; k < grid.size(); ++k) {
        const double size = std::abs(values[k].value);
        if (!(size > 4.0 * values[k].std)) continue;
        const double relative = spectrum::combine(values[k].std / size, method_relative);
        const auto turned = values[k].value *
                            std::polar(static_cast<double>(start.polarity), two_pi * grid[k] * start.delay_s);
        rows.push_back({two_pi * grid[k] / transfer.rate_hz, std::log(turned), 1.0 / (relative * relative)});
    }
    if (rows.size() < 4)
        throw CannotMeasure("too little of the stimulus stands out of the noise to find its delay");

    Unknowns first = Unknowns::Zero();
    first(0) = rows[rows.size() / 2].value.real();
    first(2) = 0.2 * two_pi * transfer.low_hz / transfer.rate_hz;
    first(3) = 0.05;
    Fitted fitted = fit_order(rows, first, 4);
    if (fitted.left_over > 2.0 && rows.size() > 12) {
        const Fitted second = fit_order(rows, fitted.unknowns, 6);
        if (second.left_over < 0.5 * fitted.left_over) fitted = second;
    }
    DelayFit fit;
    fit.polarity = start.polarity;
    fit.confidence = start.confidence;
    fit.frames = transfer.delay_frames + start.delay_s * transfer.rate_hz + fitted.unknowns(1);
    fit.std_frames = std::sqrt(fitted.delay_variance);
    return fit;
}

}  // namespace coldpin::measure
