#include "coldpin/rig/fixture_figures.h"

#include <cmath>
#include <random>

#include <Eigen/Dense>
#include <gtest/gtest.h>

#include "coldpin/rig/pad_design.h"
#include "coldpin/units/error.h"
#include "coldpin/units/level.h"

namespace coldpin::rig {
namespace {

double db(double ratio) {
    return 20.0 * std::log10(ratio);
}

FixtureParts u_pad(double series_ohms, double shunt_ohms, double input_ohms, double output_ohms) {
    FixtureParts parts;
    parts.name = "U";
    parts.output_ohms = output_ohms;
    parts.pad = Pad{PadKind::floating, series_ohms, shunt_ohms, 0.01};
    parts.preamp = {input_ohms, 1e6};
    return parts;
}

// Handbook check values for U-pads, computed with the formula of the trade: loss = 20 lg((2 R + P) / P), P =
// shunt parallel to the input; source = shunt parallel to 2 R and the output.
TEST(FixtureFiguresTest, UPadsAgreeWithTheHandbookFormula) {
    struct Row {
        double series, shunt, unloaded_db, loaded_db, source;
    };
    for (const Row& row : {Row{7500, 150, 40.09, 40.71, 148.5},
                           {75000, 150, 60.01, 60.64, 149.9},
                           {2370, 150, 30.26, 30.87, 145.4},
                           {10000, 200, 40.09, 40.91, 198.0},
                           {3600, 200, 31.36, 32.17, 194.6}}) {
        const auto unloaded = fixture_figures(u_pad(row.series, row.shunt, 1.99e6, 1e-3));
        const auto loaded = fixture_figures(u_pad(row.series, row.shunt, 2000.0, 1e-3));
        EXPECT_NEAR(unloaded.pad->loss_db, row.unloaded_db, 0.006) << row.series;
        EXPECT_NEAR(loaded.pad->loss_db, row.loaded_db, 0.006) << row.series;
        EXPECT_NEAR(loaded.pad->source_ohms, row.source, 0.06) << row.series;
        const double p = row.shunt * 2000.0 / (row.shunt + 2000.0);
        EXPECT_NEAR(loaded.pad->loss_db, db((2.0 * row.series + p) / p), 1e-9);
    }
    // With the generator's own 150 ohm in the loss: 40.79 dB.
    EXPECT_NEAR(fixture_figures(u_pad(7500, 150, 2000, 150)).pad->loss_from_emf_db, 40.79, 0.006);
}

// The injection head by a conductance matrix written out by hand: legs h, c; middle m; pins of output 1.
TEST(FixtureFiguresTest, AnInjectionHeadAgreesWithAnIndependentNodalSolution) {
    std::mt19937 random(3);
    std::uniform_real_distribution<double> any(0.2, 5.0);
    for (int round = 0; round < 50; ++round) {
        FixtureParts parts;
        parts.name = "head";
        parts.output_ohms = 100.0 * any(random);
        parts.pad = Pad{PadKind::driven_centre, 7500.0 * any(random), 150.0 * any(random), 0.01};
        parts.preamp.leg_to_shield_ohms = 5000.0 * any(random);
        parts.preamp.differential_ohms = 0.8 * 2.0 * parts.preamp.leg_to_shield_ohms;
        const double go = 2.0 / parts.output_ohms, gs = 1.0 / parts.pad->series_ohms,
                     gh = 2.0 / parts.pad->shunt_ohms, gl = 1.0 / parts.preamp.leg_to_shield_ohms;
        const double gd = 1.0 / parts.preamp.differential_ohms - 0.5 * gl;
        // h, c, p (pin 2 of output 1), q (pin 3), m
        Eigen::MatrixXd g = Eigen::MatrixXd::Zero(5, 5);
        const auto join = [&](int a, int b, double siemens) {
            g(a, a) += siemens;
            if (b < 0) return;
            g(b, b) += siemens;
            g(a, b) -= siemens;
            g(b, a) -= siemens;
        };
        join(0, -1, gl);
        join(1, -1, gl);
        join(0, 1, gd);
        join(2, 0, gs);
        join(3, 1, gs);
        join(0, 4, gh);
        join(1, 4, gh);
        join(2, -1, go);
        join(3, -1, go);
        join(4, -1, go);
        Eigen::VectorXd drive = Eigen::VectorXd::Zero(5);
        drive(2) = 0.5 * go;
        drive(3) = -0.5 * go;
        const Eigen::VectorXd v = g.partialPivLu().solve(drive);
        const auto figures = fixture_figures(parts);
        EXPECT_NEAR(figures.pad->loss_from_emf_db, -db(v(0) - v(1)), 1e-9);
        EXPECT_NEAR(figures.pad->loss_db, -db((v(0) - v(1)) / (v(2) - v(3))), 1e-9);
        Eigen::VectorXd lift = Eigen::VectorXd::Zero(5);
        lift(4) = 0.5 * go;
        const Eigen::VectorXd w = g.partialPivLu().solve(lift);
        EXPECT_NEAR(figures.feed->loss_db, -db(0.5 * (w(0) + w(1))), 1e-9);
    }
}

// Common mode through a floating shunt, single-ended drive: half of 10^(loss/20); common practice, [calc] of
// the rule.
TEST(FixtureFiguresTest, AFloatingShuntOnASingleEndedOutputLeavesTheCommonMode) {
    FixtureParts parts = u_pad(7500, 150, 1.99e6, 1e-3);
    parts.output = OutputKind::single_ended;
    parts.preamp.leg_to_shield_ohms = 1e8;
    parts.preamp.differential_ohms = 1.9e8;
    const auto floating = *fixture_figures(parts).pad;
    EXPECT_NEAR(floating.common_mode_over_differential_db, 34.0, 0.1);
    EXPECT_NEAR(gain_error_db(floating, 60.0), 0.45, 0.01);
    EXPECT_THROW(fixture_for_rig(parts, 40.0), UsageError);
    EXPECT_NEAR(fixture_for_rig(parts, 80.0).differential_loss_uncertainty_db,
                std::hypot(floating.loss_uncertainty_db, gain_error_db(floating, 80.0)), 1e-12);
    parts.pad->kind = PadKind::split;
    EXPECT_NEAR(fixture_figures(parts).pad->common_mode_over_differential_db, -6.0, 0.1);
    parts.output = OutputKind::balanced;
    EXPECT_LT(fixture_figures(parts).pad->common_mode_over_differential_db, -200.0);
}

// What a feed's legs can prove: 20 lg((Z + R)^2 / (dR Z)) for legs apart by dR into Z each; 0.1 % each way of
// 100 ohm into 1.03 kohm is 81.8 dB for a pair apart by 0.1 % and so 75.8 dB for one at either end of its
// tolerance.
TEST(FixtureFiguresTest, AFeedProvesWhatItsLegsAllow) {
    FixtureParts parts;
    parts.name = "feed";
    parts.output = OutputKind::single_ended;
    parts.output_ohms = 1e-3;
    parts.feed = CommonModeFeed{100.0, 0.001};
    parts.preamp = {2060.0, 1030.0};
    const double z = 1030.0, r = 100.0;
    const double expected = db((z + r) / (2.0 * 0.001 * r));
    EXPECT_NEAR(fixture_figures(parts).feed->rejection_limit_db, expected, 0.01);
    // The same by the published form for a pair that is 0.1 % apart, which refers to the source.
    parts.feed->tolerance = 0.0005;
    EXPECT_NEAR(fixture_figures(parts).feed->rejection_limit_db,
                db((z + r) * (z + r) / (0.1 * z)) - db((z + r) / z), 0.01);
}

// IEC 61938: 6.81 kohm in each leg. 2 x 7k5 in a U-pad: 3.33 mA; bare 100 ohm legs: 6.85 mA each (common
// practice).
TEST(FixtureFiguresTest, PhantomPowerThroughTheFixture) {
    FixtureParts parts = u_pad(7500, 150, 2000, 100);
    const auto pad = fixture_figures(parts);
    EXPECT_NEAR(pad.phantom.pad_leg_amperes, 48.0 / (6810.0 + 7500.0 + 50.0), 1e-9);
    EXPECT_NEAR(pad.phantom.highest_output_volts, 48.0 * 50.0 / (6810.0 + 7500.0 + 50.0), 1e-9);
    FixtureParts bare;
    bare.name = "bare feed";
    bare.output_ohms = 100.0;
    bare.feed = CommonModeFeed{100.0, 0.001};
    const auto feed = fixture_figures(bare);
    EXPECT_NEAR(feed.phantom.feed_amperes, 48.0 / (0.5 * (6810.0 + 100.0) + 50.0), 1e-9);
    EXPECT_NE(fixture_cautions(bare, feed).front().find("destroy"), std::string::npos);
    bare.blocking_farads = 470e-6;
    EXPECT_LT(fixture_figures(bare).phantom.feed_amperes, 1e-6);
}

// Tolerance by GUM 4.3.7 (rectangular): against a Monte-Carlo of the closed formula.
TEST(FixtureFiguresTest, TheStatedUncertaintyIsThatOfRandomParts) {
    const auto figures = fixture_figures(u_pad(7500, 150, 2000, 1e-3));
    std::mt19937 random(9);
    std::uniform_real_distribution<double> off(0.99, 1.01);
    double sum = 0.0, squares = 0.0;
    const int rounds = 20000;
    for (int i = 0; i < rounds; ++i) {
        const double shunt = 150.0 * off(random), p = shunt * 2000.0 / (shunt + 2000.0);
        const double loss = db((7500.0 * off(random) + 7500.0 * off(random) + p) / p);
        sum += loss;
        squares += loss * loss;
    }
    const double std = std::sqrt(squares / rounds - sum * sum / rounds / rounds);
    // The standard deviation of 20,000 draws is known to half a per cent.
    EXPECT_NEAR(figures.pad->loss_uncertainty_db, 2.0 * std, 0.03 * std);
}

TEST(FixtureFiguresTest, ACableLowersTheTopAndTheProvableRejection) {
    FixtureParts parts;
    parts.name = "head";
    parts.pad = Pad{PadKind::driven_centre, 7500.0, 150.0, 0.0001};
    const auto without = fixture_figures(parts);
    parts.cable.length_m = 20.0;
    const auto with = fixture_figures(parts);
    EXPECT_GT(with.pad->loss_at_20_khz_db, without.pad->loss_at_20_khz_db + 1e-4);
    EXPECT_LT(with.feed->rejection_limit_20_khz_db, without.feed->rejection_limit_20_khz_db - 6.0);
}

TEST(FixtureFiguresTest, WhatCannotBeIsRefused) {
    for (double bad : {0.0, -5.0}) {
        EXPECT_THROW(fixture_figures(u_pad(bad, 150, 2000, 100)), UsageError);
        EXPECT_THROW(fixture_figures(u_pad(7500, bad, 2000, 100)), UsageError);
        EXPECT_THROW(fixture_figures(u_pad(7500, 150, bad, 100)), UsageError);
        EXPECT_THROW(fixture_figures(u_pad(7500, 150, 2000, bad)), UsageError);
    }
    EXPECT_THROW(fixture_figures(FixtureParts{}), UsageError);
    FixtureParts low = u_pad(7500, 150, 2000, 100);
    low.preamp.leg_to_shield_ohms = 500.0;  // twice 500 across cannot make 2000
    EXPECT_THROW(fixture_figures(low), UsageError);
}

// Designs from E96: within 0.1 dB and 2 % of the resistance wanted, whatever is wanted.
TEST(PadDesignTest, E96MeetsBothWishes) {
    for (double loss_db = 20.0; loss_db <= 70.0; loss_db += 1.7)
        for (double source : {50.0, 150.0, 200.0, 600.0})
            for (double input : {1200.0, 2000.0, 10000.0})
                for (PadKind kind : {PadKind::floating, PadKind::split}) {
                    const PadDesign made =
                        design_pad({loss_db, source, input, kind, units::PreferredSeries::e96});
                    EXPECT_LT(std::abs(made.loss_error_db), 0.1) << loss_db << " " << source << " " << input;
                    EXPECT_LT(std::abs(made.source_error), 0.02) << loss_db << " " << source << " " << input;
                    // and what it says of itself is what the network does
                    FixtureParts parts = u_pad(made.pad.series_ohms, made.pad.shunt_ohms, input, 1e-3);
                    EXPECT_NEAR(fixture_figures(parts).pad->loss_db, made.loss_db, 1e-6);
                    EXPECT_NEAR(fixture_figures(parts).pad->source_ohms, made.source_ohms, 1e-3);
                }
    EXPECT_THROW(design_pad({3.0, 150.0, {}, PadKind::split, {}}), UsageError);
    EXPECT_THROW(design_pad({40.0, 0.0, {}, PadKind::split, {}}), UsageError);
}

}  // namespace
}  // namespace coldpin::rig
