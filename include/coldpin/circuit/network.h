// Small linear networks at one frequency: modified nodal analysis (Ho, Ruehli, Brennan 1975).
//
// Node 0 is the reference. Volts and amperes are complex amplitudes, resistances in ohm, capacitances in
// farad, frequencies in Hz (0: direct current, where capacitors are open). A Network is plain data: build it,
// solve it as often as wanted, from any thread.
#pragma once

#include <complex>
#include <vector>

namespace coldpin::circuit {

using Node = int;
inline constexpr Node reference_node = 0;

class Network {
  public:
    Node add_node();
    // Throw UsageError for a resistance or capacitance that is not positive and finite, or nodes that do not
    // exist.
    void add_resistor(Node a, Node b, double ohms);
    void add_capacitor(Node a, Node b, double farads);
    // Ideal; returns its number. `volts` from minus to plus.
    int add_source(Node plus, Node minus, std::complex<double> volts);

    struct Solution {
        std::vector<std::complex<double>> node_volts;      // [0] is 0
        std::vector<std::complex<double>> source_amperes;  // out of each source's plus terminal
        std::complex<double> between(Node plus, Node minus) const {
            return node_volts[static_cast<std::size_t>(plus)] - node_volts[static_cast<std::size_t>(minus)];
        }
    };
    // Throws UsageError when nodes hang in the air at that frequency, so that no single answer exists.
    Solution solve(double frequency_hz) const;

    // Resistance (or impedance) that the network shows between two nodes, its sources at rest.
    std::complex<double> impedance_between(Node a, Node b, double frequency_hz) const;

  private:
    struct Branch {
        Node a = 0, b = 0;
        double ohms = 0.0;  // 0: it is a capacitor
        double farads = 0.0;
    };
    struct Source {
        Node plus = 0, minus = 0;
        std::complex<double> volts;
    };
    void require_node(Node node) const;
    Solution solve_with(double frequency_hz, const std::vector<std::complex<double>>& source_volts, Node from,
                        Node to) const;

    int nodes_ = 1;
    std::vector<Branch> branches_;
    std::vector<Source> sources_;
};

}  // namespace coldpin::circuit
