#include <fmt/core.h>
#include <nlohmann/json.hpp>

#include "coldpin/check/hum_search.h"
#include "coldpin/measure/findings_json.h"
#include "coldpin/profile/device_profile.h"
#include "coldpin/report/sheet.h"

#include "commands.h"
#include "common_options.h"
#include "exit_status.h"
#include "terminal.h"
#include "terminal_bench.h"

namespace coldpin::app {

namespace {

struct Words {
    RigOptions rig;
    std::string device;
    check::HumSearchOptions options;
    bool json = false;
};

int search(const Words& words) {
    std::optional<profile::DeviceProfile> device;
    if (!words.device.empty()) device = profile::read_device_profile(words.device);
    const profile::RigFile rig = read_rig(words.rig, device ? &*device : nullptr);
    rig::Session session = open_session(rig);
    if (rig.setup.audio.backend == rig::BackendKind::portaudio)
        fmt::print(
            stderr,
            "  Caution: phantom power off before plugs move, then some seconds of waiting; monitors off.\n"
            "  Caution: never lift a safety earth to find or cure hum. Keep the unit's lid on, or leave open "
            "mains-powered units to people trained for it.\n");
    check::HumSearchReport report;
    {
        TerminalBench bench(false);
        report = check::search_hum(session, bench, words.options);
    }
    print(words.json ? measure::to_json(report.findings).dump(2) + "\n"
                     : report::findings_text(report.findings, {colour_wanted(), terminal_width()}));
    return exit_passed;
}

}  // namespace

void add_hum_search(CLI::App& program, Action& action) {
    auto words = std::make_shared<Words>();
    CLI::App* command = program.add_subcommand(
        "hum-search", "four captures that say where hum comes in: interface, loop, unit or fixture");
    add_rig_options(*command, words->rig);
    command->add_option("--device", words->device, "device profile, for the simulated rig's unit")
        ->type_name("FILE");
    command->add_option("--setting", words->options.setting, "of the gain control")->type_name("TEXT");
    command->add_option("--seconds", words->options.length_s, "of each capture")
        ->capture_default_str()
        ->check(CLI::Range(1.0, 60.0))
        ->type_name("T");
    command->add_option("--mains", words->options.mains_hz, "mains frequency to look near")->type_name("F");
    command->add_flag("--json", words->json, "one JSON document on standard output and nothing else");
    command->footer("Example:\n  coldpin hum-search --rig my-rig.toml");
    command->callback([words, &action] { action = [words] { return search(*words); }; });
}

}  // namespace coldpin::app
