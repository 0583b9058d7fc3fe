#include <optional>
#include <string>

#include <fmt/core.h>

#include "coldpin/rig/session.h"
#include "coldpin/signal/description.h"
#include "coldpin/signal/wav.h"
#include "coldpin/units/error.h"

#include "commands.h"
#include "common_options.h"
#include "exit_status.h"
#include "terminal_bench.h"

namespace coldpin::app {

namespace {

struct Words {
    RigOptions rig;
    std::string stimulus;
    std::string out;
    std::string feed = "differential";
    std::string setting;
    bool yes = false;
};

int capture(const Words& words) {
    const auto feed = rig::feed_from_name(words.feed);
    if (!feed)
        throw UsageError(fmt::format("--feed {}: expected differential, common-mode or idle", words.feed));
    const auto description = signal::read_description(words.stimulus);
    if (!description || !description->stimulus)
        throw UsageError(
            fmt::format("{}: no description lies beside it, so its level is unknown; make stimuli with "
                        "coldpin stimulus",
                        words.stimulus));
    const profile::RigFile rig = read_rig(words.rig, nullptr);
    rig::Session session = open_session(rig);
    if (description->stimulus->rate_hz != rig.setup.audio.sample_rate_hz)
        throw UsageError(fmt::format("{} is at {:g} Hz, the rig runs at {:g} Hz: render it at the rig's rate",
                                     words.stimulus, description->stimulus->rate_hz,
                                     rig.setup.audio.sample_rate_hz));
    rig::CaptureRequest request;
    request.label = "capture";
    request.feed = *feed;
    request.stimulus = *description->stimulus;
    // The file's own converter level, as the drive that it makes at the preamp.
    request.drive_dbu = description->stimulus->level_dbfs - session.converter_level_dbfs(*feed, 0.0);
    request.wiring = session.wiring_for(*feed, words.setting, "");
    request.device_input = rig.setup.routing.device_inputs.front();
    TerminalBench bench(words.yes);
    if (!session.prepare(request.wiring)) {
        if (!words.yes)
            bench.ask(
                fmt::format("Connect the unit for a {} feed, phantom power off, monitors off.", words.feed));
        session.confirm(request.wiring);
    }
    const rig::Capture taken = session.capture(request);
    signal::write_wav(words.out, taken.recording);
    signal::write_description(words.out, taken.description);
    fmt::print(stderr, "{}: {} frames, {} channel(s), take {}; description in {}\n", words.out,
               taken.recording.frames(), taken.recording.channels.size(), taken.takes,
               signal::description_path(words.out).string());
    return exit_passed;
}

}  // namespace

void add_capture(CLI::App& program, Action& action) {
    auto words = std::make_shared<Words>();
    CLI::App* command = program.add_subcommand("capture", "play a stimulus file, record what comes back");
    add_rig_options(*command, words->rig);
    command->add_option("--stimulus", words->stimulus, "file made by coldpin stimulus")
        ->required()
        ->type_name("FILE.wav");
    command->add_option("--out", words->out, "recording to write; its description goes beside it")
        ->required()
        ->type_name("FILE.wav");
    command->add_option("--feed", words->feed, "differential, common-mode or idle")
        ->capture_default_str()
        ->type_name("FEED");
    command->add_option("--setting", words->setting, "of the gain control, for the description")
        ->type_name("TEXT");
    command->add_flag("--yes", words->yes, "ask nothing");
    command->footer("Example:\n  coldpin capture --rig simulated --stimulus sweep.wav --out taken.wav");
    command->callback([words, &action] { action = [words] { return capture(*words); }; });
}

}  // namespace coldpin::app
