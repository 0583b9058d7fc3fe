#include "coldpin/circuit/network.h"

#include <limits>
#include <numbers>

#include <gtest/gtest.h>

#include "coldpin/units/error.h"

namespace coldpin::circuit {
namespace {

using Complex = std::complex<double>;

TEST(NetworkTest, ADividerAndItsCurrent) {
    Network network;
    const Node top = network.add_node(), middle = network.add_node();
    const int source = network.add_source(top, 0, 10.0);
    network.add_resistor(top, middle, 3000.0);
    network.add_resistor(middle, 0, 1000.0);
    const auto solution = network.solve(1000.0);
    EXPECT_NEAR(solution.between(middle, 0).real(), 2.5, 1e-12);
    EXPECT_NEAR(solution.source_amperes[static_cast<std::size_t>(source)].real(), 0.0025, 1e-15);
    EXPECT_NEAR(network.impedance_between(middle, 0, 1000.0).real(), 750.0, 1e-9);
}

TEST(NetworkTest, AnRcLowPassFollowsItsFormula) {
    Network network;
    const Node in = network.add_node(), out = network.add_node();
    network.add_source(in, 0, 1.0);
    network.add_resistor(in, out, 1592.0);
    network.add_capacitor(out, 0, 1e-7);
    for (double hz : {10.0, 1000.0, 100000.0}) {
        const Complex expected = 1.0 / Complex(1.0, 2.0 * std::numbers::pi * hz * 1592.0 * 1e-7);
        EXPECT_LT(std::abs(network.solve(hz).between(out, 0) - expected), 1e-12);
    }
    EXPECT_NEAR(std::abs(network.solve(0.0).between(out, 0)), 1.0, 1e-12);
}

// Wheatstone's bridge: the closed form of its unbalance.
TEST(NetworkTest, ABridge) {
    Network network;
    const Node top = network.add_node(), left = network.add_node(), right = network.add_node();
    network.add_source(top, 0, 1.0);
    network.add_resistor(top, left, 1000.0);
    network.add_resistor(left, 0, 1010.0);
    network.add_resistor(top, right, 1000.0);
    network.add_resistor(right, 0, 1000.0);
    EXPECT_NEAR(network.solve(50.0).between(left, right).real(), 1010.0 / 2010.0 - 0.5, 1e-14);
    network.add_resistor(left, right, 5.0);
    // Thevenin: open voltage behind 1000||1010 + 1000||1000.
    const double behind = 1000.0 * 1010.0 / 2010.0 + 500.0;
    EXPECT_NEAR(network.solve(50.0).between(left, right).real(),
                (1010.0 / 2010.0 - 0.5) * 5.0 / (5.0 + behind), 1e-14);
}

TEST(NetworkTest, WhatCannotBeIsRefused) {
    Network network;
    const Node a = network.add_node(), b = network.add_node();
    EXPECT_THROW(network.add_resistor(a, b, 0.0), UsageError);
    EXPECT_THROW(network.add_resistor(a, b, -1.0), UsageError);
    EXPECT_THROW(network.add_resistor(a, b, std::numeric_limits<double>::quiet_NaN()), UsageError);
    EXPECT_THROW(network.add_capacitor(a, b, std::numeric_limits<double>::infinity()), UsageError);
    EXPECT_THROW(network.add_resistor(a, 7, 1.0), UsageError);
    network.add_resistor(a, b, 1.0);
    EXPECT_THROW(network.solve(1000.0), UsageError);  // hangs in the air
}

}  // namespace
}  // namespace coldpin::circuit
