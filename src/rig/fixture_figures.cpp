#include "coldpin/rig/fixture_figures.h"

#include <algorithm>
#include <cmath>
#include <complex>
#include <functional>

#include <fmt/core.h>

#include "coldpin/circuit/network.h"
#include "coldpin/units/error.h"
#include "coldpin/units/level.h"

namespace coldpin::rig {

namespace {

using circuit::Network;
using circuit::Node;
using Complex = std::complex<double>;

constexpr double middle_hz = 1000.0, top_hz = 20000.0, low_hz = 50.0;
constexpr double phantom_volts = 48.0, phantom_ohms = 6810.0;  // IEC 61938
constexpr double benign_amperes = 0.004;
constexpr double refused_gain_error_db = 1.0;
constexpr double pico = 1e-12;

// The parts with every tolerance spent somehow: factors on the nominal values, 1 when nothing is said.
struct Spread {
    double series_hot = 1.0, series_cold = 1.0, shunt_hot = 1.0, shunt_cold = 1.0, feed_hot = 1.0,
           feed_cold = 1.0;
    double cable_hot = 1.0, cable_cold = 1.0;
};

struct Member {
    double Spread::*factor;
    double tolerance;
};

std::vector<Member> spread_of(const FixtureParts& parts) {
    std::vector<Member> members;
    if (parts.pad) {
        members.push_back({&Spread::series_hot, parts.pad->tolerance});
        members.push_back({&Spread::series_cold, parts.pad->tolerance});
        members.push_back({&Spread::shunt_hot, parts.pad->tolerance});
        if (parts.pad->kind != PadKind::floating)
            members.push_back({&Spread::shunt_cold, parts.pad->tolerance});
    }
    if (parts.feed) {
        members.push_back({&Spread::feed_hot, parts.feed->tolerance});
        members.push_back({&Spread::feed_cold, parts.feed->tolerance});
    }
    if (parts.cable.length_m > 0.0) {
        members.push_back({&Spread::cable_hot, 0.5 * parts.cable.mismatch});
        members.push_back({&Spread::cable_cold, 0.5 * parts.cable.mismatch});
    }
    return members;
}

void require_sensible(const FixtureParts& parts) {
    const auto refuse = [&](const std::string& what) {
        throw UsageError(fmt::format("fixture '{}': {}", parts.name, what));
    };
    const auto need_positive = [&](double value, const char* what) {
        if (!(value > 0.0) || !std::isfinite(value))
            refuse(fmt::format("{} is {:g}: a resistance must be above zero", what, value));
    };
    const auto need_tolerance = [&](double value, const char* what) {
        if (!(value >= 0.0) || !(value < 0.5))
            refuse(fmt::format("the tolerance of the {} is {:g} %: expected 0 to 50", what, 100.0 * value));
    };
    if (!parts.pad && !parts.feed) refuse("it has neither a pad nor a common-mode feed");
    need_positive(parts.output_ohms, "the output's resistance");
    need_positive(parts.preamp.differential_ohms, "the preamp's input resistance");
    need_positive(parts.preamp.leg_to_shield_ohms, "the preamp's resistance from leg to shield");
    if (parts.preamp.differential_ohms > 2.0 * parts.preamp.leg_to_shield_ohms)
        refuse(
            fmt::format("the preamp's input cannot be {:g} ohm between legs of {:g} ohm to shield: twice the "
                        "latter is the most",
                        parts.preamp.differential_ohms, parts.preamp.leg_to_shield_ohms));
    if (parts.pad) {
        need_positive(parts.pad->series_ohms, "the pad's series resistor");
        need_positive(parts.pad->shunt_ohms, "the pad's shunt resistor");
        need_tolerance(parts.pad->tolerance, "pad");
    }
    if (parts.feed) {
        need_positive(parts.feed->leg_ohms, "the feed's leg resistor");
        need_tolerance(parts.feed->tolerance, "common-mode feed");
    }
    if (parts.pad && parts.feed && parts.pad->kind == PadKind::driven_centre)
        refuse("a pad with a driven centre is its own common-mode feed: leave the separate one out");
    if (parts.blocking_farads) need_positive(*parts.blocking_farads, "the blocking capacitor");
}

enum class Driven { pad, feed };

// A network around the preamp's input, with its nodes.
struct Bench {
    Network network;
    Node hot = 0, cold = 0;                // at the preamp's input
    Node output_hot = 0, output_cold = 0;  // pins of the differential output, when the pad is connected
    Node feed_hot = 0;                     // pin 2 of the common-mode output
    int source_hot = -1, source_cold = -1, source_feed = -1;
};

void add_preamp(Bench& bench, const PreampInput& input) {
    const double by_legs = 2.0 * input.leg_to_shield_ohms;
    bench.network.add_resistor(bench.hot, 0, input.leg_to_shield_ohms);
    bench.network.add_resistor(bench.cold, 0, input.leg_to_shield_ohms);
    if (input.differential_ohms < by_legs * (1.0 - 1e-12))
        bench.network.add_resistor(bench.hot, bench.cold,
                                   1.0 / (1.0 / input.differential_ohms - 1.0 / by_legs));
}

// From the fixture's nodes to the preamp's, with what the lead adds; returns the fixture's nodes.
std::pair<Node, Node> add_cable(Bench& bench, const LeadCable& cable, const Spread& spread) {
    if (!(cable.length_m > 0.0)) return {bench.hot, bench.cold};
    Network& network = bench.network;
    const Node hot = network.add_node(), cold = network.add_node();
    const double ohms = std::max(cable.ohms_per_m * cable.length_m, 1e-6);
    network.add_resistor(hot, bench.hot, ohms * spread.cable_hot);
    network.add_resistor(cold, bench.cold, ohms * spread.cable_cold);
    const double to_shield = cable.leg_to_shield_pf_per_m * pico * cable.length_m;
    if (to_shield > 0.0) {
        network.add_capacitor(bench.hot, 0, to_shield * spread.cable_hot);
        network.add_capacitor(bench.cold, 0, to_shield * spread.cable_cold);
    }
    const double across = cable.leg_to_leg_pf_per_m * pico * cable.length_m;
    if (across > 0.0) network.add_capacitor(bench.hot, bench.cold, across);
    return {hot, cold};
}

// Pins of the differential output: driven with 1 V between them when unloaded, or at rest.
void add_output(Bench& bench, const FixtureParts& parts, bool driven) {
    Network& network = bench.network;
    bench.output_hot = network.add_node();
    const Node emf_hot = network.add_node();
    const bool single = parts.output == OutputKind::single_ended;
    const bool both = parts.output == OutputKind::balanced;
    const double leg_ohms = single ? parts.output_ohms : 0.5 * parts.output_ohms;
    bench.source_hot = network.add_source(emf_hot, 0, driven ? (both ? 0.5 : 1.0) : 0.0);
    network.add_resistor(emf_hot, bench.output_hot, leg_ohms);
    bench.output_cold = network.add_node();
    const Node emf_cold = network.add_node();
    bench.source_cold = network.add_source(emf_cold, 0, driven && both ? -0.5 : 0.0);
    network.add_resistor(emf_cold, bench.output_cold, single ? 1e-6 : leg_ohms);
}

// Pin 2 of the common-mode output; 1 V across its pins when unloaded, so half of that when both are driven.
Node add_feed_output(Bench& bench, const FixtureParts& parts, bool driven) {
    Network& network = bench.network;
    const Node emf = network.add_node();
    bench.feed_hot = network.add_node();
    const bool both = parts.output == OutputKind::balanced;
    bench.source_feed = network.add_source(emf, 0, driven ? (both ? 0.5 : 1.0) : 0.0);
    network.add_resistor(
        emf, bench.feed_hot,
        parts.output == OutputKind::single_ended ? parts.output_ohms : 0.5 * parts.output_ohms);
    if (!parts.blocking_farads) return bench.feed_hot;
    const Node behind = network.add_node();
    network.add_capacitor(bench.feed_hot, behind, *parts.blocking_farads);
    // A capacitor alone would leave the far side in the air at direct current.
    network.add_resistor(behind, 0, 1e9);
    return behind;
}

Bench build(const FixtureParts& parts, Driven driven, const Spread& spread, bool with_preamp) {
    Bench bench;
    Network& network = bench.network;
    bench.hot = network.add_node();
    bench.cold = network.add_node();
    if (with_preamp) add_preamp(bench, parts.preamp);
    const auto [hot, cold] = add_cable(bench, parts.cable, spread);
    const bool centre = parts.pad && parts.pad->kind == PadKind::driven_centre;
    if (parts.pad && (driven == Driven::pad || centre)) {
        const Pad& pad = *parts.pad;
        add_output(bench, parts, driven == Driven::pad);
        network.add_resistor(bench.output_hot, hot, pad.series_ohms * spread.series_hot);
        network.add_resistor(bench.output_cold, cold, pad.series_ohms * spread.series_cold);
        if (pad.kind == PadKind::floating) {
            network.add_resistor(hot, cold, pad.shunt_ohms * spread.shunt_hot);
        } else {
            const Node middle = centre ? add_feed_output(bench, parts, driven == Driven::feed) : 0;
            network.add_resistor(hot, middle, 0.5 * pad.shunt_ohms * spread.shunt_hot);
            network.add_resistor(cold, middle, 0.5 * pad.shunt_ohms * spread.shunt_cold);
        }
        return bench;
    }
    const Node middle = add_feed_output(bench, parts, true);
    network.add_resistor(middle, hot, parts.feed->leg_ohms * spread.feed_hot);
    network.add_resistor(middle, cold, parts.feed->leg_ohms * spread.feed_cold);
    return bench;
}

double db(Complex ratio) {
    return units::db_from_ratio(std::max(std::abs(ratio), 1e-30));
}

double pad_loss_db(const FixtureParts& parts, const Spread& spread, double hz, bool from_emf) {
    const Bench bench = build(parts, Driven::pad, spread, true);
    const auto solution = bench.network.solve(hz);
    const Complex across = from_emf ? 1.0 : solution.between(bench.output_hot, bench.output_cold);
    return -db(solution.between(bench.hot, bench.cold) / across);
}

double pad_source_ohms(const FixtureParts& parts, const Spread& spread) {
    const Bench bench = build(parts, Driven::pad, spread, false);
    return std::abs(bench.network.impedance_between(bench.hot, bench.cold, middle_hz));
}

// Expanded uncertainty of a value that depends on all parts.
double uncertainty_of(const FixtureParts& parts, const std::function<double(const Spread&)>& value) {
    double variance = 0.0;
    for (const Member& member : spread_of(parts)) {
        Spread up, down;
        up.*member.factor = 1.0 + member.tolerance;
        down.*member.factor = 1.0 - member.tolerance;
        const double half = 0.5 * (value(up) - value(down));
        variance += half * half / 3.0;
    }
    return 2.0 * std::sqrt(variance);
}

PadFigures pad_figures(const FixtureParts& parts) {
    PadFigures figures;
    figures.loss_db = pad_loss_db(parts, {}, middle_hz, false);
    figures.loss_from_emf_db = pad_loss_db(parts, {}, middle_hz, true);
    figures.loss_at_20_khz_db = pad_loss_db(parts, {}, top_hz, false) - figures.loss_db;
    figures.loss_uncertainty_db = uncertainty_of(
        parts, [&](const Spread& spread) { return pad_loss_db(parts, spread, middle_hz, false); });
    figures.source_ohms = pad_source_ohms(parts, {});
    figures.source_uncertainty_ohms =
        uncertainty_of(parts, [&](const Spread& spread) { return pad_source_ohms(parts, spread); });
    const Bench bench = build(parts, Driven::pad, {}, true);
    const auto solution = bench.network.solve(middle_hz);
    const auto at = [&](Node node) { return solution.between(node, 0); };
    figures.common_mode_over_differential_db =
        std::max(-300.0, db(0.5 * (at(bench.hot) + at(bench.cold)) / (at(bench.hot) - at(bench.cold))));
    return figures;
}

struct CommonMode {
    Complex level, conversion;
};
CommonMode common_mode(const FixtureParts& parts, const Spread& spread, double hz) {
    const Bench bench = build(parts, Driven::feed, spread, true);
    const auto solution = bench.network.solve(hz);
    const Complex hot = solution.between(bench.hot, 0), cold = solution.between(bench.cold, 0);
    return {0.5 * (hot + cold), (hot - cold) / (0.5 * (hot + cold))};
}

double worst_rejection_db(const FixtureParts& parts, double hz) {
    const Complex nominal = common_mode(parts, {}, hz).conversion;
    double worst = 0.0;
    for (const Member& member : spread_of(parts)) {
        Spread off;
        off.*member.factor = 1.0 + member.tolerance;
        worst += std::abs(common_mode(parts, off, hz).conversion - nominal);
    }
    return -db(worst + std::abs(nominal));
}

FeedFigures feed_figures(const FixtureParts& parts) {
    FeedFigures figures;
    const auto loss_db = [&](const Spread& spread) {
        return -db(common_mode(parts, spread, middle_hz).level);
    };
    // Levels are stated across the output's pins, loaded as it is; the feed loads it lightly.
    figures.loss_db = loss_db({});
    figures.loss_uncertainty_db = uncertainty_of(parts, loss_db);
    figures.rejection_limit_20_khz_db = worst_rejection_db(parts, top_hz);
    figures.rejection_limit_db =
        std::min({figures.rejection_limit_20_khz_db, worst_rejection_db(parts, middle_hz),
                  worst_rejection_db(parts, low_hz)});
    return figures;
}

PhantomFigures phantom_figures(const FixtureParts& parts) {
    PhantomFigures figures;
    for (const Driven driven : {Driven::pad, Driven::feed}) {
        if (driven == Driven::pad ? !parts.pad : !parts.feed) continue;
        FixtureParts at_rest = parts;
        Bench bench = build(at_rest, driven, {}, false);
        Network& network = bench.network;
        const Node supply = network.add_node();
        network.add_source(supply, 0, phantom_volts);
        network.add_resistor(supply, bench.hot, phantom_ohms);
        network.add_resistor(supply, bench.cold, phantom_ohms);
        // The driven sources' own volts are taken out by superposition.
        const auto with = network.solve(0.0);
        Bench without = build(at_rest, driven, {}, false);
        without.network.add_resistor(without.hot, 0, phantom_ohms);
        without.network.add_resistor(without.cold, 0, phantom_ohms);
        const auto own = without.network.solve(0.0);
        const auto into = [&](int source) {
            const auto index = static_cast<std::size_t>(source);
            return source < 0 ? 0.0 : std::abs(with.source_amperes[index] - own.source_amperes[index]);
        };
        figures.pad_leg_amperes = std::max(figures.pad_leg_amperes, into(bench.source_hot));
        figures.feed_amperes = std::max(figures.feed_amperes, into(bench.source_feed));
        for (Node node : {bench.output_hot, bench.feed_hot})
            if (node != 0)
                figures.highest_output_volts = std::max(
                    figures.highest_output_volts, std::abs(with.between(node, 0) - own.between(node, 0)));
    }
    return figures;
}

}  // namespace

FixtureFigures fixture_figures(const FixtureParts& parts) {
    require_sensible(parts);
    FixtureFigures figures;
    if (parts.pad) figures.pad = pad_figures(parts);
    if (parts.feed || (parts.pad && parts.pad->kind == PadKind::driven_centre))
        figures.feed = feed_figures(parts);
    figures.phantom = phantom_figures(parts);
    return figures;
}

double gain_error_db(const PadFigures& pad, double unit_rejection_db) {
    const double share = units::ratio_from_db(pad.common_mode_over_differential_db - unit_rejection_db);
    // Against the signal it takes more dB away than it adds with it; the larger of the two.
    return share < 0.999 ? -units::db_from_ratio(1.0 - share) : 60.0;
}

Fixture fixture_for_rig(const FixtureParts& parts, double unit_rejection_db) {
    const FixtureFigures figures = fixture_figures(parts);
    Fixture fixture;
    fixture.name = parts.name;
    if (figures.pad) {
        const double error_db = gain_error_db(*figures.pad, unit_rejection_db);
        if (error_db > refused_gain_error_db)
            throw UsageError(fmt::format(
                "fixture '{}': this pad leaves {:+.1f} dB of common mode beside the signal, which a unit of "
                "{:g} dB "
                "rejection turns into {:.1f} dB of gain error.\nUse a balanced output, or a split shunt with "
                "its "
                "middle on pin 1.",
                parts.name, figures.pad->common_mode_over_differential_db, unit_rejection_db, error_db));
        fixture.differential_loss_db = parts.measured_differential_loss_db.value_or(figures.pad->loss_db);
        fixture.differential_loss_uncertainty_db =
            std::hypot(parts.measured_differential_loss_db ? parts.measured_differential_loss_uncertainty_db
                                                           : figures.pad->loss_uncertainty_db,
                       error_db);
        fixture.source_ohms = figures.pad->source_ohms;
    }
    if (figures.feed) {
        fixture.common_mode_loss_db = parts.measured_common_mode_loss_db.value_or(figures.feed->loss_db);
        fixture.common_mode_loss_uncertainty_db = parts.measured_common_mode_loss_db
                                                      ? parts.measured_common_mode_loss_uncertainty_db
                                                      : figures.feed->loss_uncertainty_db;
        fixture.rejection_limit_db = figures.feed->rejection_limit_db;
    }
    return fixture;
}

std::vector<std::string> fixture_cautions(const FixtureParts& parts, const FixtureFigures& figures) {
    std::vector<std::string> cautions;
    const PhantomFigures& phantom = figures.phantom;
    const double worst = std::max(phantom.pad_leg_amperes, phantom.feed_amperes);
    if (worst > benign_amperes)
        cautions.push_back(
            fmt::format("With 48 V phantom power left on, {:.1f} mA would flow into an output ({:.1f} V at "
                        "its pin): enough to "
                        "destroy many. {}Phantom power off, and measured off, before connecting.",
                        1000.0 * worst, phantom.highest_output_volts,
                        phantom.feed_amperes > benign_amperes && !parts.blocking_farads
                            ? "Put a capacitor of 63 V or more in the line of the common-mode output. "
                            : ""));
    else
        cautions.push_back(
            fmt::format("With 48 V phantom power left on, at most {:.1f} mA would flow into an output "
                        "({:.2f} V at its pin). "
                        "Phantom power off all the same, and some seconds of waiting before plugging.",
                        1000.0 * worst, phantom.highest_output_volts));
    if (parts.blocking_farads)
        cautions.push_back(
            "The blocking capacitor charges when phantom power is on: wait some seconds after switching off, "
            "and "
            "never plug it hot.");
    if (parts.pad && parts.pad->kind == PadKind::floating && parts.output != OutputKind::balanced)
        cautions.push_back(
            fmt::format("This output drives one leg only and the shunt floats: the common mode at the preamp "
                        "is {:+.1f} dB re "
                        "the signal. A balanced output or a split shunt with its middle on pin 1 cures it.",
                        figures.pad->common_mode_over_differential_db));
    return cautions;
}

}  // namespace coldpin::rig
