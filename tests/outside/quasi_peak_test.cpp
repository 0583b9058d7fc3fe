// The quasi-peak meter against the tables of ITU-R BS.468-4 (single bursts, repeated bursts, overload,
// polarity; tables from memory, as the percentages of the standard), at four sample rates.
#include "coldpin/spectrum/quasi_peak.h"

#include <algorithm>
#include <cmath>
#include <functional>
#include <numbers>

#include <gtest/gtest.h>

#include "coldpin/spectrum/weighting.h"
#include "coldpin/units/level.h"

#include "kit/signals.h"

namespace coldpin::spectrum {
namespace {

constexpr double burst_hz = 5000.0;

double read(const std::vector<double>& x, double rate) {
    return quasi_peak_468(x, rate, 20.0, 0.45 * rate).highest;
}

std::vector<double> bursts(double rate, double length_s, const std::function<bool(double)>& sounds) {
    std::vector<double> x(static_cast<std::size_t>(length_s * rate));
    for (std::size_t n = 0; n < x.size(); ++n) {
        const double t = static_cast<double>(n) / rate;
        if (sounds(t)) x[n] = 0.1 * std::sin(2.0 * std::numbers::pi * burst_hz * t);
    }
    return x;
}

class QuasiPeakOutsideTest : public testing::TestWithParam<double> {};

TEST_P(QuasiPeakOutsideTest, SingleBurstsReadAsTheTableSays) {
    const double rate = GetParam(), steady = read(bursts(rate, 4.0, [](double) { return true; }), rate);
    struct Row {
        double ms, lower, upper;
    };
    for (const Row& row : {Row{1, 13.5, 21.4},
                           {2, 22.4, 31.6},
                           {5, 34, 46},
                           {10, 41, 55},
                           {20, 44, 60},
                           {50, 50, 68},
                           {100, 58, 78},
                           {200, 68, 92}}) {
        const double percent =
            100.0 *
            read(bursts(rate, 1.5, [&](double t) { return t >= 0.2 && t < 0.2 + 1e-3 * row.ms; }), rate) /
            steady;
        EXPECT_GE(percent, row.lower) << row.ms << " ms at " << rate;
        EXPECT_LE(percent, row.upper) << row.ms << " ms at " << rate;
    }
}

TEST_P(QuasiPeakOutsideTest, RepeatedBurstsReadAsTheTableSays) {
    const double rate = GetParam(), steady = read(bursts(rate, 4.0, [](double) { return true; }), rate);
    struct Row {
        double per_second, lower, upper;
    };
    for (const Row& row : {Row{2, 43, 53}, {10, 72, 82}, {100, 94, 100}}) {
        const double percent =
            100.0 *
            read(bursts(rate, 6.0, [&](double t) { return std::fmod(t, 1.0 / row.per_second) < 0.005; }),
                 rate) /
            steady;
        EXPECT_GE(percent, row.lower) << row.per_second << " at " << rate;
        EXPECT_LE(percent, row.upper) << row.per_second << " at " << rate;
    }
}

TEST_P(QuasiPeakOutsideTest, SteadySinesReadTheirWeightedRms) {
    const double rate = GetParam();
    for (double hz : {31.5, 200.0, 1000.0, 6300.0, 10000.0, 16000.0}) {
        const auto x = tests::sine(static_cast<std::size_t>(4.0 * rate), rate, hz, 0.1);
        const double expected_db =
            units::db_from_ratio(0.1 / std::numbers::sqrt2 * weighting_gain(Weighting::itu468, hz));
        // Samples beside a peak miss it by up to the cosine of half their distance; a slow sine's ripple lets
        // the first stage sink between its peaks, by e^(-half a period / 322 ms) and some in the second.
        const double detector_rate = rate * std::max(1.0, std::ceil(88000.0 / rate));
        const double missed_db = -units::db_from_ratio(std::cos(std::numbers::pi * hz / detector_rate));
        const double ripple_db = units::db_from_ratio(std::exp(0.5 / hz / 0.322));
        EXPECT_NEAR(units::db_from_ratio(read(x, rate)), expected_db, 0.05 + missed_db + 3.0 * ripple_db)
            << hz << " at " << rate;
    }
}

TEST_P(QuasiPeakOutsideTest, PolarityAndOverloadRequirements) {
    const double rate = GetParam();
    // 1 ms pulses, 20 a second, either way up: within 0.5 dB.
    auto pulses = std::vector<double>(static_cast<std::size_t>(3.0 * rate));
    for (std::size_t n = 0; n < pulses.size(); ++n)
        if (std::fmod(static_cast<double>(n) / rate, 0.05) < 0.001) pulses[n] = 0.1;
    auto inverted = pulses;
    for (double& v : inverted) v = -v;
    EXPECT_NEAR(units::db_from_ratio(read(pulses, rate) / read(inverted, rate)), 0.0, 0.5);
    // 0.6 ms bursts reduced over 20 dB: readings follow within 1 dB (here exactly, nothing clips).
    const auto loud = bursts(rate, 1.0, [](double t) { return t >= 0.2 && t < 0.2006; });
    auto quiet = loud;
    for (double& v : quiet) v *= 0.1;
    EXPECT_NEAR(units::db_from_ratio(read(loud, rate) / read(quiet, rate)), 20.0, 0.01);
    // Overswing of a suddenly applied 1 kHz: below 0.3 dB.
    const auto sudden = quasi_peak_468(tests::sine(static_cast<std::size_t>(5.0 * rate), rate, 1000.0, 0.1),
                                       rate, 20.0, 0.45 * rate);
    EXPECT_LT(units::db_from_ratio(sudden.highest / sudden.readings.back()), 0.3);
}

INSTANTIATE_TEST_SUITE_P(Rates, QuasiPeakOutsideTest, testing::Values(44100.0, 48000.0, 96000.0, 192000.0));

}  // namespace
}  // namespace coldpin::spectrum
