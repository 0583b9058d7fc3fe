#include <algorithm>
#include <filesystem>
#include <optional>
#include <string>
#include <system_error>
#include <vector>

#include <fmt/core.h>
#include <nlohmann/json.hpp>

#include "coldpin/check/calibrate.h"
#include "coldpin/measure/findings_json.h"
#include "coldpin/profile/rig_draft.h"
#include "coldpin/profile/rig_writer.h"
#include "coldpin/records/calibration_history.h"
#include "coldpin/report/calibrations.h"
#include "coldpin/report/sheet.h"
#include "coldpin/rig/devices.h"
#include "coldpin/signal/text_file.h"
#include "coldpin/units/error.h"

#include "commands.h"
#include "common_options.h"
#include "exit_status.h"
#include "terminal.h"
#include "terminal_bench.h"

namespace coldpin::app {

namespace {

struct Words {
    RigOptions rig;
    check::CalibrateOptions options;
    bool average_responding = false;
    bool history = false;
    bool yes = false;
    bool json = false;
};

int show_history(const Words& words) {
    const auto history = records::read_calibrations(words.rig.rig);
    print(report::calibrations_text(history.calibrations));
    if (history.damaged_lines > 0)
        fmt::print(stderr, "{} line(s) of the history are damaged and were left out\n",
                   history.damaged_lines);
    return exit_passed;
}

void show_cautions(const rig::Setup& setup) {
    if (setup.audio.backend != rig::BackendKind::portaudio) return;
    fmt::print(
        stderr,
        "  Caution: phantom power off, and measured off, before anything is plugged; then some seconds for "
        "its "
        "capacitors to empty.\n"
        "  Caution: monitors and headphones on this interface off: a tone plays for as long as you read.\n"
        "  Caution: only audio outputs are read here. Never put an interface, or the meter's leads of this "
        "job, on "
        "mains or loudspeaker lines.\n");
}

int whole_number(const std::string& text, int otherwise, int low, int high) {
    if (text.find_first_not_of(" \t\r\n") == std::string::npos) return otherwise;
    int number = 0;
    try {
        std::size_t end = 0;
        number = std::stoi(text, &end);
        if (text.find_first_not_of(" \t\r\n", end) != std::string::npos) number = low - 1;
    } catch (const std::exception&) {
        number = low - 1;
    }
    if (number < low || number > high)
        throw UsageError(fmt::format("'{}': expected a number from {} to {}", text, low, high));
    return number;
}

// Which device, which channels: a rig file to begin with, written once all is answered.
void choose_device(const std::string& file, TerminalBench& bench) {
    std::vector<rig::AudioDevice> able;
    for (const auto& device : rig::list_devices())
        if (device.can_serve) able.push_back(device);
    if (able.empty())
        throw CannotMeasure(
            "no audio device of this machine can serve (coldpin devices says why): plug the interface in");
    std::string question = fmt::format("{} does not exist yet; it will be made. Which device?", file);
    for (std::size_t k = 0; k < able.size(); ++k)
        question += fmt::format("\n    {}  {} ({}, {} in, {} out)", k + 1, able[k].name, able[k].host_api,
                                able[k].input_channels, able[k].output_channels);
    const auto& device = able[static_cast<std::size_t>(
        whole_number(bench.answer(question), 1, 1, static_cast<int>(able.size())) - 1)];
    profile::RigChoice choice;
    choice.name = std::filesystem::path(file).stem().string();
    choice.device = device.name;
    choice.host_api = device.host_api;
    const auto& rates = device.common_rates_hz;
    choice.sample_rate_hz =
        std::find(rates.begin(), rates.end(), 48000.0) != rates.end() ? 48000.0 : rates.front();
    const int outputs = device.output_channels, inputs = device.input_channels;
    choice.differential_output =
        whole_number(bench.answer("Output to the differential pad? (Enter: 1)"), 1, 1, outputs);
    if (outputs > 1) {
        const int other = whole_number(
            bench.answer("Output to the common-mode feed? (0: none, the plug is moved; Enter: 2)"), 2, 0,
            outputs);
        if (other > 0) choice.common_mode_output = other;
    }
    choice.device_input = whole_number(bench.answer("Input that hears the preamp? (Enter: 1)"), 1, 1, inputs);
    if (inputs > 1) {
        const int reference = whole_number(
            bench.answer("Input with the reference tap, which hears what is sent? (0: none; Enter: 2)"), 2, 0,
            inputs);
        if (reference > 0) choice.reference_input = reference;
    }
    const std::string text = profile::rig_text_for(choice);
    profile::rig_from_text(text, file);  // refuses one channel named twice
    signal::write_text_file(file, text);
    fmt::print(stderr, "  {} written: look at [fixtures.head] and [limits] in it before the first run.\n",
               file);
}

int calibrate(const Words& words) {
    TerminalBench bench(words.yes);
    if (words.rig.rig != "simulated") {
        std::error_code error;
        if (!std::filesystem::exists(words.rig.rig, error) && !words.yes) choose_device(words.rig.rig, bench);
        profile::require_writable(words.rig.rig);
    }
    const profile::RigFile rig = read_rig(words.rig, nullptr);
    check::CalibrateOptions options = words.options;
    options.accuracy.true_rms = !words.average_responding;
    options.time_utc = utc_now();
    rig::Session session = open_session(rig);
    show_cautions(rig.setup);
    const check::CalibrationResult result = check::calibrate(session, bench, options);
    bench.clear();
    if (words.rig.rig != "simulated") {
        const std::string text = signal::read_text_file(words.rig.rig);
        // The one that goes is kept too, unless the history has it already.
        const auto history = records::read_calibrations(words.rig.rig);
        if (history.calibrations.empty() && rig.setup.calibration)
            records::append_calibration(words.rig.rig, *rig.setup.calibration);
        profile::replace_rig_file(
            words.rig.rig,
            profile::with_table(text, "calibration", profile::calibration_lines(result.calibration)));
        records::append_calibration(words.rig.rig, result.calibration);
    }
    print(words.json ? measure::to_json(result.findings).dump(2) + "\n"
                     : report::findings_text(result.findings, {colour_wanted(), terminal_width()}));
    if (words.rig.rig == "simulated")
        fmt::print(stderr, "The built-in simulated rig has no file, so nothing was written.\n");
    else
        fmt::print(stderr, "Written into {}; all calibrations are kept in {}.\n", words.rig.rig,
                   records::calibration_history_path(words.rig.rig).string());
    return exit_passed;
}

}  // namespace

void add_calibrate(CLI::App& program, Action& action) {
    auto words = std::make_shared<Words>();
    CLI::App* command = program.add_subcommand(
        "calibrate", "volts, response, noise, latency and honesty of the path, by a multimeter and a loop");
    add_rig_options(*command, words->rig);
    auto& options = words->options;
    command->add_option("--reading", options.reading, "what the meter shows, if it is known: \"1.228 V\"")
        ->type_name("TEXT");
    command->add_option("--level-dbfs", options.level_dbfs, "of the tone for the meter")
        ->capture_default_str()
        ->type_name("L");
    command
        ->add_option("--meter-percent", options.accuracy.percent, "the meter's accuracy, percent of reading")
        ->capture_default_str()
        ->check(CLI::Range(0.0, 50.0))
        ->type_name("P");
    command->add_option("--meter-digits", options.accuracy.digits, "... plus so many digits")
        ->capture_default_str()
        ->check(CLI::Range(0.0, 1000.0))
        ->type_name("N");
    command->add_option("--meter-counts", options.accuracy.counts, "of its display: 2000 shows up to 1999")
        ->capture_default_str()
        ->check(CLI::Range(100.0, 10000000.0))
        ->type_name("N");
    command->add_flag("--average-responding", words->average_responding, "the meter is not a true-RMS one");
    command->add_option("--meter", options.meter, "its name and range, for the record")->type_name("TEXT");
    command->add_option("--knobs", options.knobs, "where the interface's knobs stand, for the record")
        ->type_name("TEXT");
    command->add_flag("--accept-reading", options.accept_reading,
                      "although it contradicts the loop or the calibration before");
    command->add_flag("--history", words->history, "show the calibrations so far, and how they drift");
    command->add_flag("--yes", words->yes, "ask nothing: for rigs whose loop is switched, with --reading");
    command->add_flag("--json", words->json, "one JSON document on standard output and nothing else");
    command->footer(
        "Examples:\n"
        "  coldpin calibrate --rig my-rig.toml --meter-percent 0.8 --meter-digits 3\n"
        "  coldpin calibrate --rig my-rig.toml --history");
    command->callback([words, &action] {
        action = [words] { return words->history ? show_history(*words) : calibrate(*words); };
    });
}

}  // namespace coldpin::app
