#include "low_sweep_slips.h"

#include <algorithm>
#include <cmath>
#include <complex>
#include <numbers>
#include <vector>

#include <Eigen/Dense>

#include "coldpin/spectrum/statistics.h"

namespace coldpin::rig {

namespace {

using spectrum::median;
using Complex = std::complex<double>;
constexpr double two_pi = 2.0 * std::numbers::pi;
constexpr int per_turn = 16;
constexpr int half_points = per_turn;  // a window is a turn each side
constexpr int hole = 1;                // points around the middle that may hold the damage itself
constexpr double least_step_frames = 0.6;
constexpr double sure = 8.0;            // robust standard deviations
constexpr int neighbourhood = 6;        // turns each side that tell what is ordinary here
constexpr int least_beside = per_turn;  // points on each side of a place, or it is not judged
constexpr double least_delay_step_turns = 0.5;

// What a window's points give: the complex amplitude at its middle and the step there, both as of exp(i
// theta).
struct Functionals {
    Eigen::RowVectorXcd amplitude, step;
};

// Least squares over a window whose middle is at turn phase 0: the same for every window, up to that phase.
Functionals make_functionals() {
    const int count = 2 * half_points;
    std::vector<int> points;
    for (int k = 0; k < count; ++k)
        if (k < half_points - hole || k >= half_points + hole) points.push_back(k);
    Eigen::MatrixXd basis(static_cast<Eigen::Index>(points.size()), 14);
    for (Eigen::Index row = 0; row < basis.rows(); ++row) {
        const double turn = (points[static_cast<std::size_t>(row)] - half_points + 0.5) / per_turn;
        const double c = std::cos(two_pi * turn), s = std::sin(two_pi * turn);
        Eigen::Index column = 0;
        for (double power = 1.0; column < 6; power *= turn) {
            basis(row, column++) = c * power;
            basis(row, column++) = s * power;
        }
        for (int harmonic : {2, 3}) {
            basis(row, column++) = std::cos(two_pi * harmonic * turn);
            basis(row, column++) = std::sin(two_pi * harmonic * turn);
        }
        basis(row, column++) = 1.0;
        basis(row, column++) = turn;
        basis(row, column++) = turn > 0.0 ? c : 0.0;
        basis(row, column++) = turn > 0.0 ? s : 0.0;
    }
    const Eigen::MatrixXd solve = basis.completeOrthogonalDecomposition().pseudoInverse();
    Functionals found{Eigen::RowVectorXcd::Zero(count), Eigen::RowVectorXcd::Zero(count)};
    for (std::size_t i = 0; i < points.size(); ++i) {
        const auto from = static_cast<Eigen::Index>(i);
        const Eigen::Index to = points[i];
        // a cos + b sin = Re((a - i b) exp(i theta))
        found.amplitude(to) = Complex(solve(0, from), -solve(1, from));
        found.step(to) = Complex(solve(12, from), -solve(13, from));
    }
    return found;
}

// Integral of the straight lines between samples, from 0 to a place between them.
class RunningIntegral {
  public:
    explicit RunningIntegral(std::span<const double> samples)
        : samples_(samples), sums_(samples.size(), 0.0) {
        for (std::size_t n = 1; n < samples.size(); ++n)
            sums_[n] = sums_[n - 1] + 0.5 * (samples[n - 1] + samples[n]);
    }
    double to(double place) const {
        const auto n = static_cast<std::size_t>(place);
        const double part = place - static_cast<double>(n);
        return sums_[n] + part * (samples_[n] + 0.5 * part * (samples_[n + 1] - samples_[n]));
    }

  private:
    std::span<const double> samples_;
    std::vector<double> sums_;
};

// The sweep in sixteenths of its turns, and what the windows around them give.
struct Course {
    std::vector<double> frames;      // of the recording, where a window has its middle
    std::vector<double> hz;          // the sweep's frequency there
    std::vector<Complex> amplitude;  // of the smooth sweep there
    std::vector<double> steps;       // of its phase there, as frames of delay
};

double median_between(const std::vector<double>& series, int first, int last) {
    return median({series.begin() + first, series.begin() + last});
}

// A loss of about a whole turn and more leaves the phase as it was, but from there on the delay is another
// one: the phase turns against frequency by a turn and more per e-fold, where a filter of nth order turns
// n/12 at most.
std::optional<LowSlip> find_whole_turns(const Course& course, double rate_hz) {
    const auto count = static_cast<int>(course.amplitude.size());
    std::vector<double> turns_per_e;
    for (int k = 0; k + per_turn < count; ++k) {
        const auto here = static_cast<std::size_t>(k), next = static_cast<std::size_t>(k) + per_turn;
        turns_per_e.push_back(std::arg(course.amplitude[next] * std::conj(course.amplitude[here])) / two_pi /
                              std::log(course.hz[next] / course.hz[here]));
    }
    const int reach = 4 * per_turn, gap = 2 * per_turn;
    const auto length = static_cast<int>(turns_per_e.size());
    std::optional<LowSlip> found;
    double clearest = 1.0;
    for (int k = 2 * gap; k + 2 * gap < length; k += 4) {
        const int first = std::max(0, k - gap - reach), last = std::min(length, k + gap + reach);
        const double before = median_between(turns_per_e, first, k - gap),
                     after = median_between(turns_per_e, k + gap, last);
        std::vector<double> deviations;
        for (int j = first; j < k - gap; ++j)
            deviations.push_back(std::abs(turns_per_e[static_cast<std::size_t>(j)] - before));
        for (int j = k + gap; j < last; ++j)
            deviations.push_back(std::abs(turns_per_e[static_cast<std::size_t>(j)] - after));
        const double needed = std::max(least_delay_step_turns, sure * median(deviations) / 0.6745);
        const double clarity = std::abs(after - before) / needed;
        if (clarity > clearest) {
            clearest = clarity;
            const auto at = static_cast<std::size_t>(k) + per_turn / 2;
            found = {static_cast<std::size_t>(course.frames[at]), (after - before) / course.hz[at] * rate_hz};
        }
    }
    return found;
}

}  // namespace

std::optional<LowSlip> find_low_slip(std::span<const double> channel, double rate_hz,
                                     const signal::Stimulus& stimulus, long long lag) {
    const auto& sweep = std::get<signal::Sweep>(stimulus.kind);
    const double constant_s = signal::sweep_time_constant_s(sweep, stimulus.length_s);
    const double turns_per_e = sweep.from_hz * constant_s;  // the sweep's phase is turns_per_e exp(t / L)
    const double low_hz = 1.5 * sweep.from_hz, high_hz = std::min(rate_hz / 40.0, 0.8 * sweep.to_hz);
    std::optional<LowSlip> slip;
    if (high_hz < 2.0 * low_hz) return slip;
    const double first_turn = std::ceil(constant_s * low_hz), last_turn = std::floor(constant_s * high_hz);
    const RunningIntegral integral(channel);
    const auto frame_at = [&](double turn) {
        return constant_s * std::log(turn / turns_per_e) * rate_hz + static_cast<double>(lag);
    };
    std::vector<double> points, frames;
    for (double turn = first_turn; turn < last_turn; turn += 1.0 / per_turn) {
        const double from = frame_at(turn), to = frame_at(turn + 1.0 / per_turn);
        if (from < 0.0 || to + 2.0 > static_cast<double>(channel.size())) continue;
        points.push_back((integral.to(to) - integral.to(from)) / (to - from));
        frames.push_back(from);
    }
    const int window = 2 * half_points;
    const auto count = static_cast<int>(points.size()) - window + 1;
    if (count < 4 * neighbourhood * per_turn) return slip;
    static const Functionals functionals = make_functionals();
    Course course;
    for (int k = 0; k < count; ++k) {
        const Eigen::Map<const Eigen::VectorXd> here(points.data() + k, window);
        const Complex amplitude = functionals.amplitude * here, step = functionals.step * here;
        // Windows are turned to one another by whole sixteenths.
        const Complex back = std::polar(1.0, -two_pi * (k % per_turn) / per_turn);
        const double frame = frames[static_cast<std::size_t>(k) + half_points];
        course.frames.push_back(frame);
        course.hz.push_back(sweep.from_hz *
                            std::exp((frame - static_cast<double>(lag)) / rate_hz / constant_s));
        course.amplitude.push_back(amplitude * back);
        course.steps.push_back(std::arg(1.0 + step / (amplitude + 1e-300)) / two_pi / course.hz.back() *
                               rate_hz);
    }
    const auto& steps = course.steps;
    // A filter's bend and a hum beside give every place some step, which changes slowly; a loss stands out of
    // the places on both sides of it.
    const int near = per_turn + per_turn / 2, far = 5 * per_turn;
    std::vector<double> beyond;
    std::vector<int> places;
    for (int k = near + least_beside; k + near + least_beside < count; ++k) {
        const double before = median_between(steps, std::max(0, k - far), k - near),
                     after = median_between(steps, k + near, std::min(count, k + far));
        beyond.push_back(steps[static_cast<std::size_t>(k)] - 0.5 * (before + after));
        places.push_back(k);
    }
    if (beyond.empty()) return slip;
    const auto length = static_cast<int>(beyond.size());
    double clearest = 1.0, needed = 0.0;
    for (int i = 0; i < length; ++i) {
        const int first = std::max(0, i - neighbourhood * per_turn),
                  last = std::min(length, i + neighbourhood * per_turn);
        if (i % 4 == 0) {
            std::vector<double> around;
            for (int j = first; j < last; ++j)
                if (std::abs(j - i) > near) around.push_back(std::abs(beyond[static_cast<std::size_t>(j)]));
            needed = std::max(least_step_frames, sure * median(around) / 0.6745);
        }
        const double clarity = std::abs(beyond[static_cast<std::size_t>(i)]) / needed;
        if (clarity > clearest) {
            clearest = clarity;
            const auto at = static_cast<std::size_t>(places[static_cast<std::size_t>(i)]);
            slip = {static_cast<std::size_t>(course.frames[at]), beyond[static_cast<std::size_t>(i)]};
        }
    }
    if (!slip) slip = find_whole_turns(course, rate_hz);
    return slip;
}

}  // namespace coldpin::rig
