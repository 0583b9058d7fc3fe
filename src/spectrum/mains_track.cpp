#include "mains_track.h"

#include <algorithm>
#include <cmath>
#include <numbers>

#include <Eigen/Dense>

#include "coldpin/spectrum/phasor_sum.h"
#include "coldpin/spectrum/window.h"

namespace coldpin::spectrum {

namespace {

constexpr double two_pi = 2.0 * std::numbers::pi;
constexpr double block_s = 2.0;  // a tone 2 Hz beside a harmonic is out of the window's main lobe

// Phasors of one harmonic in overlapping blocks, turned back by the track at each block's middle.
struct Demodulated {
    int harmonic = 1;
    std::vector<std::complex<double>> blocks;
    double noise = 0.0;  // mean |z|^2 of noise a block
};

struct Blocks {
    std::size_t length = 0;
    std::size_t hop = 0;
    std::size_t count = 0;
    double middle_s(std::size_t b, double rate_hz) const {
        return (static_cast<double>(b * hop) + 0.5 * static_cast<double>(length)) / rate_hz;
    }
};

Blocks blocks_for(std::size_t samples, double rate_hz) {
    Blocks blocks;
    blocks.length = std::min(static_cast<std::size_t>(block_s * rate_hz), samples / 2);
    blocks.hop = std::max<std::size_t>(1, blocks.length / 8);
    blocks.count = (samples - blocks.length) / blocks.hop + 1;
    return blocks;
}

std::vector<Demodulated> demodulate(std::span<const double> samples, double rate_hz, const PhaseTrack& track,
                                    const std::vector<int>& harmonics, const Blocks& blocks,
                                    const std::vector<double>& window) {
    std::vector<Demodulated> all;
    all.reserve(harmonics.size());
    std::vector<double> shaped(blocks.length);
    for (int harmonic : harmonics) all.push_back({harmonic, {}, 0.0});
    for (std::size_t b = 0; b < blocks.count; ++b) {
        const std::size_t begin = b * blocks.hop;
        for (std::size_t n = 0; n < blocks.length; ++n) shaped[n] = samples[begin + n] * window[n];
        const double middle_s = blocks.middle_s(b, rate_hz);
        const double local_hz = track.frequency(middle_s), phase = track.phase(middle_s);
        for (Demodulated& one : all) {
            const double step = two_pi * one.harmonic * local_hz / rate_hz;
            // Referred to the block's middle, where the local frequency's own error turns nothing.
            const std::complex<double> z =
                phasor_sum(shaped, step) * std::polar(1.0, step * 0.5 * static_cast<double>(blocks.length));
            one.blocks.push_back(z * std::polar(1.0, -one.harmonic * phase));
        }
    }
    for (Demodulated& one : all) {
        // Second differences kill the line and its slow turning; for noise in blocks that overlap by 7/8 they
        // are small too, so blocks a whole length apart are compared when there are any.
        const std::size_t apart = std::min<std::size_t>(8, one.blocks.size() - 1);
        double sum = 0.0;
        std::size_t terms = 0;
        for (std::size_t b = apart; b < one.blocks.size(); ++b, ++terms)
            sum += std::norm(std::abs(one.blocks[b]) - std::abs(one.blocks[b - apart]));
        one.noise = terms > 0 ? sum / static_cast<double>(terms) : 0.0;
    }
    return all;
}

void unwrap(std::vector<double>& phases) {
    for (std::size_t b = 1; b < phases.size(); ++b)
        phases[b] -= two_pi * std::round((phases[b] - phases[b - 1]) / two_pi);
}

// One Gauss-Newton step: what each harmonic's phase deviates is harmonic * (polynomial of the track) + its
// own constant. Returns the weighted mean square that is left, per degree of freedom.
struct Step {
    Eigen::VectorXd bend;
    double left_over = 0.0;
    double mean_std = 0.0;  // of the phase advance over the whole length
    double largest = 0.0;
};

Step solve_step(const std::vector<Demodulated>& all, const Blocks& blocks, double rate_hz, double length_s,
                int order) {
    const auto unknowns = static_cast<Eigen::Index>(order) + static_cast<Eigen::Index>(all.size());
    Eigen::MatrixXd normal = Eigen::MatrixXd::Zero(unknowns, unknowns);
    Eigen::VectorXd right = Eigen::VectorXd::Zero(unknowns);
    double squares = 0.0, rows = 0.0;
    std::vector<double> phases(blocks.count);
    for (std::size_t h = 0; h < all.size(); ++h) {
        const Demodulated& one = all[h];
        double power = 0.0;
        for (std::size_t b = 0; b < blocks.count; ++b) {
            phases[b] = std::arg(one.blocks[b]);
            power += std::norm(one.blocks[b]);
        }
        power /= static_cast<double>(blocks.count);
        if (!(power > 0.0)) continue;
        unwrap(phases);
        // Phase variance is half the noise-to-line ratio; capped, for a model error of 0.01 rad is always
        // there.
        const double weight = 1.0 / (0.5 * one.noise / power + 1e-4);
        for (std::size_t b = 0; b < blocks.count; ++b) {
            const double u = blocks.middle_s(b, rate_hz) / length_s - 0.5;
            Eigen::VectorXd row = Eigen::VectorXd::Zero(unknowns);
            double power_of_u = u;
            for (int k = 0; k < order; ++k, power_of_u *= u) row(k) = one.harmonic * power_of_u;
            row(static_cast<Eigen::Index>(order) + static_cast<Eigen::Index>(h)) = 1.0;
            normal += weight * row * row.transpose();
            right += weight * row * phases[b];
            squares += weight * phases[b] * phases[b];
            rows += 1.0;
        }
    }
    Step step;
    normal.diagonal().array() += 1e-12;
    const Eigen::LDLT<Eigen::MatrixXd> solver(normal);
    const Eigen::VectorXd solution = solver.solve(right);
    step.bend = solution.head(order);
    step.left_over =
        std::max(0.0, squares - right.dot(solution)) / std::max(1.0, rows - static_cast<double>(unknowns));
    // The mean over the length is its phase advance from end to end: the odd bends' sum at u = 1/2 less at
    // -1/2.
    Eigen::VectorXd unit = Eigen::VectorXd::Zero(unknowns);
    unit(0) = 1.0;
    if (order >= 3) unit(2) = 0.25;
    // Blocks overlap by seven eighths: they carry about a quarter of their number in independent ones.
    step.mean_std =
        std::sqrt(std::max(0.0, 4.0 * unit.dot(solver.solve(unit)) * std::max(step.left_over, 0.05)));
    step.largest = step.bend.cwiseAbs().maxCoeff();
    return step;
}

}  // namespace

double PhaseTrack::phase(double t_s) const noexcept {
    const double u = t_s / length_s - 0.5;
    return two_pi * base_hz * t_s + u * (bend[0] + u * (bend[1] + u * (bend[2] + u * bend[3])));
}

double PhaseTrack::frequency(double t_s) const noexcept {
    const double u = t_s / length_s - 0.5;
    return base_hz +
           (bend[0] + u * (2.0 * bend[1] + u * (3.0 * bend[2] + u * 4.0 * bend[3]))) / (two_pi * length_s);
}

double PhaseTrack::mean_hz() const noexcept {
    return (phase(length_s) - phase(0.0)) / (two_pi * length_s);
}

PhaseTrack fit_track(std::span<const double> samples, double rate_hz, double start_hz,
                     const std::vector<int>& harmonics) {
    PhaseTrack track;
    track.base_hz = start_hz;
    track.length_s = static_cast<double>(samples.size()) / rate_hz;
    const Blocks blocks = blocks_for(samples.size(), rate_hz);
    const std::vector<double> window = window_samples(Window::blackman_harris, blocks.length);
    // Low numbers first: their phases cannot slip a turn between blocks; then all, whose turning is n times
    // finer. The order follows the length, since a block sees 2 s: no more bends than blocks side by side can
    // show.
    const auto side_by_side =
        static_cast<int>(std::lround(track.length_s * rate_hz / static_cast<double>(blocks.length)));
    const int highest_order = std::clamp(side_by_side + 1, 1, 4);
    double previous = 0.0;
    for (int order = 1; order <= highest_order; ++order) {
        PhaseTrack trial = track;
        double left_over = 0.0;
        for (const bool all_of_them : {false, true}) {
            std::vector<int> used;
            for (int harmonic : harmonics)
                if (all_of_them || harmonic <= std::max(3, harmonics.front())) used.push_back(harmonic);
            for (int round = 0; round < 4; ++round) {
                const auto demodulated = demodulate(samples, rate_hz, trial, used, blocks, window);
                const Step step = solve_step(demodulated, blocks, rate_hz, trial.length_s,
                                             std::min(order, static_cast<int>(blocks.count) - 1));
                for (Eigen::Index k = 0; k < step.bend.size(); ++k)
                    trial.bend[static_cast<std::size_t>(k)] += step.bend(k);
                trial.mean_std_hz = step.mean_std / (two_pi * trial.length_s);
                left_over = step.left_over;
                if (step.largest < 1e-5) break;
            }
        }
        // A further bend must pay: by a third of what was left, and only while something real is left.
        const bool pays = order == 1 || left_over < 0.7 * previous;
        if (pays) {
            // The first and last second are extrapolated; how far the last bend moved the mean says how well.
            if (order > 1)
                trial.mean_std_hz = std::hypot(trial.mean_std_hz, 0.5 * (trial.mean_hz() - track.mean_hz()));
            track = trial;
            previous = left_over;
        }
    }
    return track;
}

std::complex<double> along_track(std::span<const double> samples, const std::vector<double>& window,
                                 double rate_hz, const PhaseTrack& track, int harmonic) {
    constexpr std::size_t piece = 256;  // over 5 ms the track is a straight line to 1e-6 rad
    std::complex<double> sum = 0.0;
    double weights = 0.0;
    std::array<double, piece> shaped{};
    for (std::size_t begin = 0; begin < samples.size(); begin += piece) {
        const std::size_t count = std::min(piece, samples.size() - begin);
        for (std::size_t n = 0; n < count; ++n) {
            shaped[n] = samples[begin + n] * window[begin + n];
            weights += window[begin + n];
        }
        const double start_s = static_cast<double>(begin) / rate_hz,
                     middle_s = start_s + 0.5 * static_cast<double>(count) / rate_hz;
        const double step = two_pi * harmonic * track.frequency(middle_s) / rate_hz;
        sum += phasor_sum(std::span(shaped).first(count), step) *
               std::polar(1.0, -std::fmod(harmonic * track.phase(start_s), two_pi));
    }
    return weights > 0.0 ? 2.0 * sum / weights : 0.0;
}

}  // namespace coldpin::spectrum
