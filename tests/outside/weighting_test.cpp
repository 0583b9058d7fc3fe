// A and C weighting against the table of IEC 61672-1 (rounded to 0.1 dB there; its exact frequencies are
// 1000 * 10^(n/10) Hz) and the class 1 limits of the 2002 edition; 468 weighting against the table of
// Recommendation ITU-R BS.468-4 with its tolerances. A to three decimals: from the standard's own formula.
#include "coldpin/spectrum/weighting.h"

#include <cmath>

#include <gtest/gtest.h>

#include "coldpin/units/level.h"

namespace coldpin::spectrum {
namespace {

double level_db(Weighting weighting, double hz) {
    return units::db_from_ratio(weighting_gain(weighting, hz));
}

struct Row {
    double a_db, a_exact_db, c_db, above_db, below_db;  // class 1 limits: +above, -below
};
constexpr double without = 1e9;

// From 10 Hz to 20 kHz in thirds of an octave: n = -20 ... 13.
const Row iec_61672_1[] = {
    {-70.4, -70.430, -14.3, 3.5, without}, {-63.4, -63.371, -11.2, 3.0, without},
    {-56.7, -56.688, -8.5, 2.5, 4.5},      {-50.5, -50.452, -6.2, 2.5, 2.5},
    {-44.7, -44.703, -4.4, 2.5, 2.0},      {-39.4, -39.440, -3.0, 2.0, 2.0},
    {-34.6, -34.630, -2.0, 1.5, 1.5},      {-30.2, -30.228, -1.3, 1.5, 1.5},
    {-26.2, -26.194, -0.8, 1.5, 1.5},      {-22.5, -22.504, -0.5, 1.5, 1.5},
    {-19.1, -19.143, -0.3, 1.5, 1.5},      {-16.1, -16.098, -0.2, 1.5, 1.5},
    {-13.4, -13.350, -0.1, 1.5, 1.5},      {-10.9, -10.870, 0.0, 1.5, 1.5},
    {-8.6, -8.630, 0.0, 1.4, 1.4},         {-6.6, -6.611, 0.0, 1.4, 1.4},
    {-4.8, -4.808, 0.0, 1.4, 1.4},         {-3.2, -3.233, 0.0, 1.4, 1.4},
    {-1.9, -1.900, 0.0, 1.4, 1.4},         {-0.8, -0.824, 0.0, 1.4, 1.4},
    {0.0, 0.000, 0.0, 1.1, 1.1},           {0.6, 0.591, 0.0, 1.4, 1.4},
    {1.0, 0.981, -0.1, 1.6, 1.6},          {1.2, 1.200, -0.2, 1.6, 1.6},
    {1.3, 1.271, -0.3, 1.6, 1.6},          {1.2, 1.199, -0.5, 1.6, 1.6},
    {1.0, 0.970, -0.8, 1.6, 1.6},          {0.5, 0.549, -1.3, 2.1, 2.1},
    {-0.1, -0.121, -2.0, 2.1, 2.6},        {-1.1, -1.111, -3.0, 2.1, 3.1},
    {-2.5, -2.492, -4.4, 2.6, 3.6},        {-4.3, -4.318, -6.2, 3.0, 6.0},
    {-6.6, -6.603, -8.5, 3.5, 17.0},       {-9.3, -9.317, -11.2, 4.0, without},
};

TEST(WeightingOutsideTest, AAndCAreThoseOfIec61672) {
    for (int i = 0; i < 34; ++i) {
        const double hz = 1000.0 * std::pow(10.0, (i - 20) / 10.0);
        const Row& row = iec_61672_1[i];
        const double a = level_db(Weighting::a, hz), c = level_db(Weighting::c, hz);
        EXPECT_NEAR(a, row.a_exact_db, 0.00051) << hz;
        EXPECT_EQ(std::lround(a * 10.0), std::lround(row.a_db * 10.0)) << hz;
        EXPECT_EQ(std::lround(c * 10.0), std::lround(row.c_db * 10.0)) << hz;
        EXPECT_LT(a - row.a_db, row.above_db);
        EXPECT_LT(row.a_db - a, row.below_db);
    }
}

struct Itu {
    double hz, db, tolerance_db;
};
const Itu bs_468_4[] = {{31.5, -29.9, 2.0}, {63, -23.9, 1.4},   {100, -19.8, 1.0},   {200, -13.8, 0.85},
                        {400, -7.8, 0.7},   {800, -1.9, 0.55},  {1000, 0.0, 0.5},    {2000, 5.6, 0.5},
                        {3150, 9.0, 0.5},   {4000, 10.5, 0.5},  {5000, 11.7, 0.5},   {6300, 12.2, 0.051},
                        {7100, 12.0, 0.2},  {8000, 11.4, 0.4},  {9000, 10.1, 0.6},   {10000, 8.1, 0.8},
                        {12500, 0.0, 1.2},  {14000, -5.3, 1.4}, {16000, -11.7, 1.6}, {20000, -22.2, 2.0},
                        {31500, -42.7, 2.8}};

TEST(WeightingOutsideTest, The468CurveIsThatOfBs468WithinAFractionOfItsTolerance) {
    for (const Itu& row : bs_468_4) {
        const double db = level_db(Weighting::itu468, row.hz);
        EXPECT_LE(std::abs(db - row.db), row.tolerance_db) << row.hz;
        // The table is rounded to 0.1 dB, so half of that is the table's; the rational form adds 0.01 dB.
        EXPECT_NEAR(db, row.db, 0.06) << row.hz;
    }
    EXPECT_NEAR(level_db(Weighting::itu468, 1000.0), 0.0, 1e-12);
}

// White noise from 20 Hz to 20 kHz: values computed from the standards' formulas with another program.
TEST(WeightingOutsideTest, WhiteNoiseLosesWhatTheFormulasSay) {
    for (const auto& [weighting, expected_db, within] :
         {std::tuple{Weighting::a, -2.048, 0.001}, std::tuple{Weighting::itu468, 7.30, 0.01}}) {
        double sum = 0.0;
        constexpr int steps = 200000;
        for (int i = 0; i < steps; ++i) {
            const double w = weighting_gain(weighting, 20.0 + (i + 0.5) * 19980.0 / steps);
            sum += w * w / steps;
        }
        EXPECT_NEAR(units::db_from_power_ratio(sum), expected_db, within);
    }
}

}  // namespace
}  // namespace coldpin::spectrum
