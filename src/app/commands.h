// The commands of the program: each parses its words, calls the rooms below and prints. No logic lives here.
#pragma once

#include <functional>

#include <CLI/CLI.hpp>

namespace coldpin::app {

// Set by the command that was named; returns the exit status of docs/commands.md.
using Action = std::function<int()>;

void add_devices(CLI::App& program, Action& action);
void add_stimulus(CLI::App& program, Action& action);
void add_capture(CLI::App& program, Action& action);
void add_measure(CLI::App& program, Action& action);
void add_check(CLI::App& program, Action& action);
void add_analyse(CLI::App& program, Action& action);
void add_calibrate(CLI::App& program, Action& action);
void add_hum_search(CLI::App& program, Action& action);
void add_fixture(CLI::App& program, Action& action);
void add_report(CLI::App& program, Action& action);

}  // namespace coldpin::app
