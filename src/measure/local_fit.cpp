#include "local_fit.h"

#include <algorithm>
#include <cmath>

#include <Eigen/Dense>

namespace coldpin::measure {

namespace {

constexpr double least_half_width_bins = 3.2;
constexpr double half_width_of_frequency = 0.0145;  // a 48th of an octave to each side
constexpr double neighbours = 1.5;                  // gated bins share their noise with the next ones

}  // namespace

TransferPoint local_fit(const TransferBins& bins, double frequency_hz) {
    const double centre = frequency_hz / bins.bin_hz;
    const double half = std::max(least_half_width_bins, centre * half_width_of_frequency);
    const auto first = static_cast<std::ptrdiff_t>(std::max(1.0, std::ceil(centre - half)));
    const auto last = std::min(static_cast<std::ptrdiff_t>(bins.value.size()) - 2,
                               static_cast<std::ptrdiff_t>(std::floor(centre + half)));
    Eigen::Matrix3d normal = Eigen::Matrix3d::Zero();
    Eigen::Vector3cd right = Eigen::Vector3cd::Zero();
    double scale = 0.0;
    for (auto k = first; k <= last; ++k) scale = std::max(scale, bins.weight[static_cast<std::size_t>(k)]);
    if (!(scale > 0.0)) return {};
    const auto weight_of = [&](std::ptrdiff_t k, double u) {
        const double bell = std::pow(1.0 - std::abs(u * u * u), 3);  // tricube (Cleveland 1979)
        return bell * bins.weight[static_cast<std::size_t>(k)] / scale;
    };
    for (auto k = first; k <= last; ++k) {
        const double u = (static_cast<double>(k) - centre) / half;
        const double weight = weight_of(k, u);
        const Eigen::Vector3d row(1.0, u, u * u);
        normal += weight * row * row.transpose();
        right += (weight * row).cast<std::complex<double>>() * bins.value[static_cast<std::size_t>(k)];
    }
    // Few bins with energy beyond an edge would let a quadratic run wild: a whiff of ridge on the bend.
    normal(2, 2) += 1e-6 * normal(0, 0);
    const Eigen::Matrix3d inverse = normal.inverse();
    const Eigen::Vector3cd solution = inverse.cast<std::complex<double>>() * right;
    double variance = 0.0;
    for (auto k = first; k <= last; ++k) {
        const double u = (static_cast<double>(k) - centre) / half;
        const double share = weight_of(k, u) * (inverse(0, 0) + inverse(0, 1) * u + inverse(0, 2) * u * u);
        const double std = bins.std[static_cast<std::size_t>(k)];
        variance += share * share * std * std;
    }
    return {solution(0), solution(1) / (half * bins.bin_hz), std::sqrt(neighbours * variance)};
}

}  // namespace coldpin::measure
