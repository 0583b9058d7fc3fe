#include <filesystem>
#include <string>
#include <vector>

#include <fmt/core.h>

#include "coldpin/check/perform.h"
#include "coldpin/profile/device_profile.h"
#include "coldpin/records/run_folder.h"
#include "coldpin/report/html.h"
#include "coldpin/report/sheet.h"
#include "coldpin/units/error.h"

#include "commands.h"
#include "common_options.h"
#include "exit_status.h"
#include "introduction.h"
#include "terminal.h"
#include "terminal_bench.h"
#include "version.h"

namespace coldpin::app {

namespace {

struct Words {
    RigOptions rig;
    std::string device;
    std::string runs = "runs";
    bool yes = false;
    bool json = false;
    check::RunDetails details;
};

int check_unit(const Words& words) {
    const profile::DeviceProfile device = profile::read_device_profile(words.device);
    const profile::RigFile rig = read_rig(words.rig, &device);
    rig::Session session = open_session(rig);
    check::Run run;
    {
        TerminalBench bench(words.yes);
        const check::CapturePlan plan = check::plan_captures(device, session);
        introduce(device, session, plan, bench, words.yes);
        run = check::perform(device, rig, session, bench, words.details);
    }
    const auto folder = records::save_run(run, words.runs, {{"report.html", report::html(run)}});
    if (words.json) {
        print(records::run_to_json_text(run));
    } else {
        print(report::sheet(run, {colour_wanted(), terminal_width()}));
        print(fmt::format("\nRun folder   {}\nReport       {}\n", folder.string(),
                          (folder / "report.html").string()));
    }
    return exit_status(run.verdict);
}

}  // namespace

void add_check(CLI::App& program, Action& action) {
    auto words = std::make_shared<Words>();
    CLI::App* command = program.add_subcommand(
        "check", "the device profile's whole plan on one unit: verdict, sheet, run folder");
    add_rig_options(*command, words->rig);
    command->add_option("--device", words->device, "device profile: what this type of preamp should do")
        ->required()
        ->type_name("FILE");
    command->add_option("--serial", words->details.serial, "serial number of the unit")->type_name("TEXT");
    command->add_option("--operator", words->details.operator_name, "who measures")->type_name("TEXT");
    command->add_option("--note", words->details.notes, "kept with the run")->type_name("TEXT");
    command->add_option("--tag", words->details.tags, "kept with the run; may be repeated")
        ->type_name("TEXT");
    command->add_option("--runs", words->runs, "folder for run folders")
        ->capture_default_str()
        ->type_name("FOLDER");
    command->add_flag_function(
        "--no-preflight", [words](std::int64_t) { words->details.preflight = false; },
        "do not look at wiring and path first (two seconds)");
    command->add_flag("--auto-level", words->details.auto_level,
                      "at each setting the highest drive that clips nothing, where the plan names none");
    command->add_flag("--accept-path", words->details.accept_path,
                      "measure although the path is not honest; the sheet says so");
    command->add_flag("--yes", words->yes,
                      "ask nothing: everything is connected and set as the profile says");
    command->add_flag("--json", words->json, "run.json on standard output and nothing else");
    command->footer(
        "Examples:\n"
        "  coldpin check --rig simulated --device profiles/devices/fennmark-pl2.toml --serial 0042\n"
        "  coldpin check --rig my-rig.toml --device profiles/devices/fennmark-pl2.toml --serial 0042 --yes");
    command->callback([words, &action] {
        action = [words] {
            words->details.tool_version = tool_version;
            words->details.time_utc = utc_now();
            return check_unit(*words);
        };
    });
}

}  // namespace coldpin::app
