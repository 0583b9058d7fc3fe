// Phantom resistors (IEC 61938: 6.81 kohm, matched to 0.4 %) and what their mismatch does to rejection, by
// our nodal analysis against values of the trade (common practice: published tables of apparent rejection for
// mismatched inputs). And the thermal noise of a pad's source resistance against the Johnson formula with the
// SI value of k.
#include <cmath>

#include <gtest/gtest.h>

#include "coldpin/circuit/network.h"
#include "coldpin/rig/fixture_figures.h"
#include "coldpin/units/level.h"
#include "coldpin/units/physics.h"

namespace coldpin {
namespace {

// A source of 75 ohm in each leg; bias and phantom resistor from each leg to the shield. What reaches the
// legs differentially when the source drives so, over what does when it lifts both.
double rejection_db(double phantom_hot, double phantom_cold, double bias_hot, double bias_cold) {
    const auto across = [&](double hot_volts, double cold_volts) {
        circuit::Network network;
        const auto source_hot = network.add_node(), source_cold = network.add_node(),
                   hot = network.add_node(), cold = network.add_node();
        network.add_source(source_hot, 0, hot_volts);
        network.add_source(source_cold, 0, cold_volts);
        network.add_resistor(source_hot, hot, 75.0);
        network.add_resistor(source_cold, cold, 75.0);
        network.add_resistor(hot, 0, phantom_hot);
        network.add_resistor(cold, 0, phantom_cold);
        network.add_resistor(hot, 0, bias_hot);
        network.add_resistor(cold, 0, bias_cold);
        return std::abs(network.solve(1000.0).between(hot, cold));
    };
    return 20.0 * std::log10(across(0.5, -0.5) / across(1.0, 1.0));
}

TEST(PhantomMismatchOutsideTest, MismatchedPhantomResistorsLimitRejection) {
    struct Row {
        double apart, db;
    };
    for (const Row& row : {Row{0.02, 73.9}, {0.01, 79.9}, {0.001, 99.8}, {0.00015, 116.0}})
        EXPECT_NEAR(
            rejection_db(6810.0 * (1.0 + 0.5 * row.apart), 6810.0 * (1.0 - 0.5 * row.apart), 1210.0, 1210.0),
            row.db, row.apart < 0.0005 ? 0.4 : 0.15)
            << row.apart;
    // The standard's own 0.4 %.
    EXPECT_NEAR(rejection_db(6810.0 * 1.002, 6810.0 * 0.998, 1210.0, 1210.0), 87.8, 0.15);
    EXPECT_NEAR(rejection_db(6810.0, 6810.0, 1210.0 * 1.005, 1210.0 * 0.995), 64.8, 0.15);
}

TEST(PhantomMismatchOutsideTest, APadsNoiseIsThatOfItsSourceResistance) {
    rig::FixtureParts parts;
    parts.name = "U pad";
    parts.output_ohms = 1e-3;
    parts.pad = rig::Pad{rig::PadKind::floating, 7500.0, 150.0, 0.01};
    const double ohms = rig::fixture_figures(parts).pad->source_ohms;
    EXPECT_NEAR(ohms, 148.51, 0.01);
    const double volts = units::thermal_noise_volts(ohms, 293.15, 20000.0);
    EXPECT_NEAR(volts, std::sqrt(4.0 * 1.380649e-23 * 293.15 * 148.515 * 20000.0), 1e-11);
    // 150 ohm at 20 degrees in 20 kHz is -130.92 dBu; this is a little less.
    EXPECT_NEAR(units::dbu_from_volts_rms(volts), -130.92 + 10.0 * std::log10(148.51 / 150.0), 0.01);
}

}  // namespace
}  // namespace coldpin
