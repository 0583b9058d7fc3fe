#include <optional>
#include <string>

#include <fmt/core.h>
#include <nlohmann/json.hpp>

#include "coldpin/check/fixture_findings.h"
#include "coldpin/measure/findings_json.h"
#include "coldpin/profile/fixture_file.h"
#include "coldpin/profile/rig_writer.h"
#include "coldpin/report/sheet.h"
#include "coldpin/rig/fixture_figures.h"
#include "coldpin/rig/pad_design.h"
#include "coldpin/signal/text_file.h"
#include "coldpin/units/error.h"

#include "commands.h"
#include "exit_status.h"
#include "terminal.h"

namespace coldpin::app {

namespace {

struct Words {
    std::string file, rig, series = "E96", shunt = "split";
    std::optional<double> loss_db, source_ohms, input_ohms;
    double unit_rejection_db = 60.0, temperature_c = 20.0;
    bool json = false;
};

int design(const Words& words) {
    rig::PadWish wish;
    wish.loss_db = *words.loss_db;
    wish.source_ohms = words.source_ohms.value_or(150.0);
    wish.input_ohms = words.input_ohms;
    wish.series = words.series == "E24" ? units::PreferredSeries::e24 : units::PreferredSeries::e96;
    wish.kind = words.shunt == "floating"
                    ? rig::PadKind::floating
                    : (words.shunt == "split" ? rig::PadKind::split : rig::PadKind::driven_centre);
    const rig::PadDesign made = rig::design_pad(wish);
    const bool halves = wish.kind != rig::PadKind::floating;
    if (words.json) {
        const nlohmann::ordered_json json = {{"schema", "coldpin-pad/1"},
                                             {"series_ohms", made.pad.series_ohms},
                                             {"series_trim_ohms", made.series_trim_ohms},
                                             {"shunt_ohms", made.pad.shunt_ohms},
                                             {"shunt", words.shunt},
                                             {"loss_db", made.loss_db},
                                             {"loss_error_db", made.loss_error_db},
                                             {"source_ohms", made.source_ohms},
                                             {"source_error_percent", 100.0 * made.source_error}};
        print(json.dump(2) + "\n");
        return exit_passed;
    }
    print(fmt::format(
        "{} values for {:g} dB {} from {:g} ohm\n"
        "  in each leg     {}\n"
        "  {}{:g} ohm{}\n"
        "  gives           {:.3f} dB ({:+.3f}) from {:.2f} ohm ({:+.2f} %)\n\n"
        "For a fixture file (profiles/fixtures has whole ones):\n"
        "  [pad]\n  shunt = \"{}\"\n  series_ohms = {:g}\n  shunt_ohms = {:g}\n  tolerance_percent = 1\n",
        words.series, wish.loss_db,
        wish.input_ohms ? fmt::format("into {:g} ohm", *wish.input_ohms) : std::string("unloaded"),
        wish.source_ohms,
        made.series_trim_ohms > 0.0
            ? fmt::format("{:g} ohm and {:g} ohm in series", made.pad.series_ohms - made.series_trim_ohms,
                          made.series_trim_ohms)
            : fmt::format("{:g} ohm", made.pad.series_ohms),
        halves ? "shunt, twice    " : "across          ",
        halves ? 0.5 * made.pad.shunt_ohms : made.pad.shunt_ohms,
        wish.kind == rig::PadKind::split
            ? ", the middle on pin 1"
            : (halves ? ", the middle on the common-mode output" : ", from leg to leg"),
        made.loss_db, made.loss_error_db, made.source_ohms, 100.0 * made.source_error, words.shunt,
        made.pad.series_ohms, made.pad.shunt_ohms));
    return exit_passed;
}

int compute(const Words& words) {
    const rig::FixtureParts parts = profile::read_fixture(words.file);
    const measure::Findings findings =
        check::fixture_findings(parts, words.unit_rejection_db, words.temperature_c);
    if (!words.rig.empty()) profile::require_writable(words.rig);
    print(words.json
              ? measure::to_json(findings).dump(2) + "\n"
              : parts.name + "\n" + report::findings_text(findings, {colour_wanted(), terminal_width()}));
    if (words.rig.empty()) return exit_passed;
    const rig::Fixture fixture = rig::fixture_for_rig(parts, words.unit_rejection_db);
    const std::string text = signal::read_text_file(words.rig);
    profile::replace_rig_file(
        words.rig, profile::with_table(text, "fixtures." + profile::fixture_in_use(text, words.rig),
                                       profile::fixture_lines(fixture)));
    fmt::print(stderr, "{}: the fixture in use now has these figures\n", words.rig);
    return exit_passed;
}

}  // namespace

void add_fixture(CLI::App& program, Action& action) {
    auto words = std::make_shared<Words>();
    CLI::App* command = program.add_subcommand(
        "fixture", "pads, feeds and terminations computed from resistors, or resistors for a pad wanted");
    command->add_option("file", words->file, "fixture described by its parts")->type_name("FILE");
    command->add_option("--rig", words->rig, "write what comes out into this rig file's fixture in use")
        ->type_name("FILE");
    command
        ->add_option(
            "--unit-rejection-db", words->unit_rejection_db,
            "least rejection expected of units, for the error that common mode left by the pad makes")
        ->capture_default_str()
        ->type_name("X");
    command->add_option("--temperature-c", words->temperature_c, "of the resistors, for their noise")
        ->capture_default_str()
        ->type_name("T");
    command->add_option("--loss-db", words->loss_db, "design a pad of this loss")->type_name("X");
    command->add_option("--source-ohms", words->source_ohms, "that the preamp is to see, default 150")
        ->type_name("R");
    command->add_option("--input-ohms", words->input_ohms, "of the preamp; without it the pad is unloaded")
        ->type_name("R");
    command->add_option("--series", words->series, "preferred values: E24 or E96")
        ->capture_default_str()
        ->check(CLI::IsMember({"E24", "E96"}));
    command->add_option("--shunt", words->shunt, "floating, split or driven-centre")
        ->capture_default_str()
        ->check(CLI::IsMember({"floating", "split", "driven-centre"}));
    command->add_flag("--json", words->json, "one JSON document on standard output and nothing else");
    command->footer(
        "Examples:\n"
        "  coldpin fixture profiles/fixtures/injection-head-40db.toml\n"
        "  coldpin fixture profiles/fixtures/injection-head-40db.toml --rig my-rig.toml\n"
        "  coldpin fixture --loss-db 40 --source-ohms 150 --input-ohms 2000 --series E96");
    command->callback([words, &action] {
        action = [words] {
            if (words->loss_db && words->file.empty()) return design(*words);
            if (words->file.empty() || words->loss_db)
                throw UsageError(
                    "fixture: name a fixture file, or a pad wanted with --loss-db (coldpin fixture --help)");
            return compute(*words);
        };
    });
}

}  // namespace coldpin::app
