#include "coldpin/profile/fixture_file.h"

#include <fmt/core.h>

#include "coldpin/rig/fixture_figures.h"
#include "coldpin/signal/text_file.h"
#include "coldpin/units/error.h"

#include "toml_reader.h"

namespace coldpin::profile {

namespace {

constexpr double smallest_ohms = 1e-3;
constexpr Range resistances = {smallest_ohms, 1e9};
constexpr Range tolerances_percent = {0.0, 49.0};
constexpr Range losses_db = {-20.0, 140.0};
constexpr Range uncertainties_db = {0.0, 20.0};

rig::OutputKind read_output_kind(TableReader& table) {
    const std::string kind = table.need_choice("kind", {"balanced", "impedance-balanced", "single-ended"});
    if (kind == "balanced") return rig::OutputKind::balanced;
    return kind == "single-ended" ? rig::OutputKind::single_ended : rig::OutputKind::impedance_balanced;
}

rig::Pad read_pad(TableReader& table) {
    rig::Pad pad;
    const std::string kind = table.need_choice("shunt", {"floating", "split", "driven-centre"});
    pad.kind = kind == "floating" ? rig::PadKind::floating
                                  : (kind == "split" ? rig::PadKind::split : rig::PadKind::driven_centre);
    pad.series_ohms = table.need_number("series_ohms", resistances);
    pad.shunt_ohms = table.need_number("shunt_ohms", resistances);
    pad.tolerance = 0.01 * table.need_number("tolerance_percent", tolerances_percent);
    return pad;
}

void read_cable(TableReader& table, rig::LeadCable& cable) {
    cable.length_m = table.need_number("length_m", {0.0, 1000.0});
    const auto take = [&](std::string_view key, double& member, Range range) {
        if (const auto value = table.number(key, range)) member = *value;
    };
    take("leg_to_shield_pf_per_m", cable.leg_to_shield_pf_per_m, {0.0, 10000.0});
    take("leg_to_leg_pf_per_m", cable.leg_to_leg_pf_per_m, {0.0, 10000.0});
    take("ohms_per_m", cable.ohms_per_m, {0.0, 100.0});
    if (const auto percent = table.number("mismatch_percent", {0.0, 50.0})) cable.mismatch = 0.01 * *percent;
}

}  // namespace

rig::FixtureParts fixture_from_text(const std::string& text, const std::string& source_name) {
    const toml::table document = parse_toml(text, source_name);
    TableReader top(document, source_name, "");
    read_schema(top, "fixture", "a fixture file");
    top.allow_only({"schema", "name", "output", "pad", "common_mode_feed", "preamp", "cable", "measured"});
    rig::FixtureParts parts;
    parts.name = top.need_text("name");
    if (!top.has("output")) top.fail_missing("output", "[output] with its kind: what drives the fixture");
    top.table("output", [&](TableReader& table) {
        parts.output = read_output_kind(table);
        parts.output_ohms = table.need_number("source_ohms", resistances);
    });
    if (!top.has("pad") && !top.has("common_mode_feed"))
        top.fail_missing("pad", "[pad], [common_mode_feed] or both");
    top.table("pad", [&](TableReader& table) { parts.pad = read_pad(table); });
    top.table("common_mode_feed", [&](TableReader& table) {
        const bool centre = parts.pad && parts.pad->kind == rig::PadKind::driven_centre;
        if (const auto farads = table.number("blocking_capacitor_uf", {1e-3, 1e5}))
            parts.blocking_farads = 1e-6 * *farads;
        if (centre) {
            if (table.has("leg_ohms"))
                table.fail("leg_ohms", "resistors of its own",
                           "none: with a driven centre the halves of the shunt are the feed");
            return;
        }
        rig::CommonModeFeed feed;
        feed.leg_ohms = table.need_number("leg_ohms", resistances);
        feed.tolerance = 0.01 * table.need_number("tolerance_percent", tolerances_percent);
        parts.feed = feed;
    });
    if (!top.has("preamp"))
        top.fail_missing("preamp", "[preamp] with input_ohms: its input loads the fixture");
    top.table("preamp", [&](TableReader& table) {
        parts.preamp.differential_ohms = table.need_number("input_ohms", resistances);
        parts.preamp.leg_to_shield_ohms =
            table.number("leg_to_shield_ohms", resistances).value_or(parts.preamp.differential_ohms);
        if (parts.preamp.differential_ohms > 2.0 * parts.preamp.leg_to_shield_ohms)
            table.fail("input_ohms", fmt::format("{:g}", parts.preamp.differential_ohms),
                       fmt::format("twice leg_to_shield_ohms ({:g}) at most",
                                   2.0 * parts.preamp.leg_to_shield_ohms));
    });
    top.table("cable", [&](TableReader& table) { read_cable(table, parts.cable); });
    top.table("measured", [&](TableReader& table) {
        parts.measured_differential_loss_db = table.number("differential_loss_db", losses_db);
        if (parts.measured_differential_loss_db)
            parts.measured_differential_loss_uncertainty_db =
                table.need_number("differential_loss_uncertainty_db", uncertainties_db);
        parts.measured_common_mode_loss_db = table.number("common_mode_loss_db", losses_db);
        if (parts.measured_common_mode_loss_db)
            parts.measured_common_mode_loss_uncertainty_db =
                table.need_number("common_mode_loss_uncertainty_db", uncertainties_db);
    });
    return parts;
}

rig::FixtureParts read_fixture(const std::filesystem::path& file) {
    return fixture_from_text(signal::read_text_file(file), file.string());
}

}  // namespace coldpin::profile
