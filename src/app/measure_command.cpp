#include <optional>
#include <string>

#include <fmt/core.h>
#include <nlohmann/json.hpp>

#include "coldpin/check/perform.h"
#include "coldpin/check/single_measurement.h"
#include "coldpin/measure/findings_json.h"
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
    check::SingleMeasurement wanted;
    bool yes = false;
    bool json = false;
    bool preflight = true;
    bool accept_path = false;
    bool auto_level = false;
};

int measure_once(const Words& words) {
    std::optional<profile::DeviceProfile> device;
    if (!words.device.empty()) device = profile::read_device_profile(words.device);
    const profile::RigFile rig = read_rig(words.rig, device ? &*device : nullptr);
    const profile::DeviceProfile plan = check::profile_for(words.wanted, device ? &*device : nullptr);
    rig::Session session = open_session(rig);
    check::Run run;
    {
        TerminalBench bench(words.yes);
        introduce(plan, session, check::plan_captures(plan, session), bench, words.yes);
        check::RunDetails details;
        details.tool_version = tool_version;
        details.time_utc = utc_now();
        details.preflight = words.preflight;
        details.accept_path = words.accept_path;
        details.auto_level = words.auto_level;
        run = check::perform(plan, rig, session, bench, details);
    }
    for (auto& step : run.steps) {
        if (step.measure != words.wanted.kind) continue;
        if (!step.failure.empty()) throw CannotMeasure(step.failure);
        step.findings.cautions.insert(step.findings.cautions.begin(), run.cautions.begin(),
                                      run.cautions.end());
        print(words.json ? measure::to_json(step.findings).dump(2) + "\n"
                         : report::findings_text(step.findings, {colour_wanted(), terminal_width()}));
    }
    return exit_passed;
}

}  // namespace

void add_measure(CLI::App& program, Action& action) {
    auto words = std::make_shared<Words>();
    auto& wanted = words->wanted;
    CLI::App* command = program.add_subcommand("measure", "one measurement, now");
    command
        ->add_option("kind", wanted.kind, "gain, response, noise, hum, cmrr, distortion, polarity or latency")
        ->required()
        ->type_name("KIND");
    add_rig_options(*command, words->rig);
    command
        ->add_option("--device", words->device, "device profile: settings, levels and plan to take it from")
        ->type_name("FILE");
    command->add_option("--setting", wanted.setting, "of the gain control, as the profile names it")
        ->type_name("TEXT");
    command->add_option("--unit-channel", wanted.unit_channel, "channel of the unit, as the profile names it")
        ->type_name("TEXT");
    command
        ->add_option("--nominal-gain-db", wanted.nominal_gain_db,
                     "about what the unit amplifies, without a profile")
        ->type_name("G");
    command
        ->add_option("--drive-dbu", wanted.drive_dbu,
                     "level at the preamp's input; without it chosen for +4 dBu out")
        ->type_name("X");
    command->add_option("--common-mode-drive-dbu", wanted.common_mode_drive_dbu, "for cmrr")->type_name("Y");
    command->add_option("--frequency", wanted.frequencies_hz, "in Hz; may be repeated")
        ->delimiter(',')
        ->type_name("F");
    command->add_option("--seconds", wanted.length_s, "length of the stimulus")->type_name("T");
    command->add_option("--source-ohms", wanted.source_ohms, "resistance across the input")->type_name("R");
    command->add_option("--mains", wanted.mains_hz, "mains frequency to look near")->type_name("F");
    command->add_flag_function(
        "--no-preflight", [words](std::int64_t) { words->preflight = false; },
        "do not look at wiring and path first (two seconds)");
    command->add_flag("--auto-level", words->auto_level, "the highest drive that clips nothing");
    command->add_flag("--accept-path", words->accept_path,
                      "measure although the path is not honest; a caution says so");
    command->add_flag("--yes", words->yes, "ask nothing");
    command->add_flag("--json", words->json, "one JSON document on standard output and nothing else");
    command->footer(
        "Examples:\n"
        "  coldpin measure noise --rig simulated\n"
        "  coldpin measure gain --rig my-rig.toml --device profiles/devices/fennmark-pl2.toml --setting '40 "
        "dB'");
    command->callback([words, &action] { action = [words] { return measure_once(*words); }; });
}

}  // namespace coldpin::app
