#include "coldpin/circuit/network.h"

#include <cmath>
#include <numbers>

#include <Eigen/Dense>
#include <fmt/core.h>

#include "coldpin/units/error.h"

namespace coldpin::circuit {

namespace {

using Complex = std::complex<double>;

void require_positive(double value, const char* what) {
    if (!(value > 0.0) || !std::isfinite(value))
        throw UsageError(fmt::format("a {} of {:g} does not exist: it must be above zero", what, value));
}

}  // namespace

Node Network::add_node() {
    return nodes_++;
}

void Network::require_node(Node node) const {
    if (node < 0 || node >= nodes_) throw UsageError(fmt::format("the network has no node {}", node));
}

void Network::add_resistor(Node a, Node b, double ohms) {
    require_node(a);
    require_node(b);
    require_positive(ohms, "resistance");
    branches_.push_back({a, b, ohms, 0.0});
}

void Network::add_capacitor(Node a, Node b, double farads) {
    require_node(a);
    require_node(b);
    require_positive(farads, "capacitance");
    branches_.push_back({a, b, 0.0, farads});
}

int Network::add_source(Node plus, Node minus, Complex volts) {
    require_node(plus);
    require_node(minus);
    sources_.push_back({plus, minus, volts});
    return static_cast<int>(sources_.size()) - 1;
}

Network::Solution Network::solve_with(double frequency_hz, const std::vector<Complex>& source_volts,
                                      Node from, Node to) const {
    const auto unknowns = static_cast<Eigen::Index>(nodes_ - 1) + static_cast<Eigen::Index>(sources_.size());
    Eigen::MatrixXcd matrix = Eigen::MatrixXcd::Zero(unknowns, unknowns);
    Eigen::VectorXcd known = Eigen::VectorXcd::Zero(unknowns);
    const auto row = [](Node node) { return static_cast<Eigen::Index>(node) - 1; };
    for (const Branch& branch : branches_) {
        const Complex siemens = branch.ohms > 0.0
                                    ? Complex(1.0 / branch.ohms)
                                    : Complex(0.0, 2.0 * std::numbers::pi * frequency_hz * branch.farads);
        if (branch.a > 0) matrix(row(branch.a), row(branch.a)) += siemens;
        if (branch.b > 0) matrix(row(branch.b), row(branch.b)) += siemens;
        if (branch.a > 0 && branch.b > 0) {
            matrix(row(branch.a), row(branch.b)) -= siemens;
            matrix(row(branch.b), row(branch.a)) -= siemens;
        }
    }
    for (std::size_t s = 0; s < sources_.size(); ++s) {
        const auto current = static_cast<Eigen::Index>(nodes_ - 1) + static_cast<Eigen::Index>(s);
        for (const auto& [node, sign] : {std::pair{sources_[s].plus, 1.0}, {sources_[s].minus, -1.0}}) {
            if (node == 0) continue;
            matrix(row(node), current) -= sign;  // the current flows out of plus into the network
            matrix(current, row(node)) += sign;
        }
        known(current) = source_volts[s];
    }
    if (from > 0) known(row(from)) += 1.0;
    if (to > 0) known(row(to)) -= 1.0;
    const Eigen::FullPivLU<Eigen::MatrixXcd> solver(matrix);
    if (unknowns > 0 && !solver.isInvertible())
        throw UsageError("the network has a part that hangs in the air, so its voltages are not defined");
    const Eigen::VectorXcd solved = unknowns > 0 ? solver.solve(known).eval() : known;
    Solution solution;
    solution.node_volts.assign(static_cast<std::size_t>(nodes_), 0.0);
    for (Node node = 1; node < nodes_; ++node)
        solution.node_volts[static_cast<std::size_t>(node)] = solved(row(node));
    for (std::size_t s = 0; s < sources_.size(); ++s)
        solution.source_amperes.push_back(
            solved(static_cast<Eigen::Index>(nodes_ - 1) + static_cast<Eigen::Index>(s)));
    return solution;
}

Network::Solution Network::solve(double frequency_hz) const {
    std::vector<Complex> volts;
    for (const Source& source : sources_) volts.push_back(source.volts);
    return solve_with(frequency_hz, volts, 0, 0);
}

Complex Network::impedance_between(Node a, Node b, double frequency_hz) const {
    require_node(a);
    require_node(b);
    const std::vector<Complex> at_rest(sources_.size(), 0.0);
    return solve_with(frequency_hz, at_rest, a, b).between(a, b);
}

}  // namespace coldpin::circuit
