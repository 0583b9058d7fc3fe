// coldpin: a bench rig for microphone preamplifiers. Exit statuses: exit_status.h.
#include <cstdio>
#include <cstdlib>
#include <exception>
#include <string>

#include <CLI/CLI.hpp>
#include <fmt/core.h>

#include "coldpin/rig/backend.h"
#include "coldpin/units/error.h"

#include "commands.h"
#include "exit_status.h"
#include "terminal.h"
#include "version.h"

namespace {

// A stream whose audio server died is left behind (closing it would hang); ordinary exit would then wait for
// it in the library's own clean-up.
[[noreturn]] void leave(int status) {
    // Nothing can be done any more about what cannot be written.
    static_cast<void>(std::fflush(stdout));
    static_cast<void>(std::fflush(stderr));
    if (coldpin::rig::teardown_was_abandoned()) std::_Exit(status);
    std::exit(status);
}

int complain(const std::string& message, int status) {
    fmt::print(stderr, "coldpin: {}\n", message);
    return status;
}

int run(int argc, char** argv) {
    using namespace coldpin::app;
    CLI::App program{
        "coldpin: drives a microphone preamp, records what comes out, and says in volts, decibels and plain "
        "words\n"
        "whether it amplifies by the right amount, evenly, quietly, and without letting hum in."};
    program.name("coldpin");
    program.set_version_flag("--version", std::string("coldpin ") + tool_version);
    program.require_subcommand(1);
    program.footer(
        "Example, with no hardware at all:\n"
        "  coldpin check --rig simulated --device profiles/devices/fennmark-pl2.toml --serial 0042\n"
        "\nExit status: 0 passed, 1 failed, 2 wrong command, file or profile, 3 could not measure, 4 "
        "undecided.\n"
        "Phantom power off before you connect an interface's output to a preamp's input; monitors off.");

    Action action;
    add_check(program, action);
    add_measure(program, action);
    add_analyse(program, action);
    add_capture(program, action);
    add_stimulus(program, action);
    add_devices(program, action);
    add_calibrate(program, action);
    add_hum_search(program, action);
    add_fixture(program, action);
    add_report(program, action);

    try {
        program.parse(argc, argv);
    } catch (const CLI::CallForHelp&) {
        print(program.help());
        return exit_passed;
    } catch (const CLI::CallForVersion&) {
        print(program.version() + "\n");
        return exit_passed;
    } catch (const CLI::ParseError& error) {
        if (error.get_exit_code() == 0) {
            print(program.help("", CLI::AppFormatMode::All));
            return exit_passed;
        }
        return complain(fmt::format("{}\nTry: coldpin --help, or coldpin COMMAND --help.", error.what()),
                        exit_usage);
    }
    return action();
}

}  // namespace

int main(int argc, char** argv) {
    using namespace coldpin::app;
    install_stop_handler();
    int status = exit_cannot_measure;
    try {
        status = run(argc, argv);
    } catch (const coldpin::UsageError& error) {
        status = complain(error.what(), exit_usage);
    } catch (const coldpin::Error& error) {
        status = complain(error.what(), exit_cannot_measure);
    } catch (const std::bad_alloc&) {
        status = complain("not enough memory for this recording: shorten it, or analyse it in parts",
                          exit_cannot_measure);
    } catch (const std::exception& error) {
        status = complain(fmt::format("an unexpected fault, please report it: {}", error.what()),
                          exit_cannot_measure);
    }
    leave(status);
}
