// What the program's output goes to, and the way to stop it from the keyboard.
#pragma once

#include <atomic>
#include <string>

namespace coldpin::app {

bool stdout_is_terminal();
bool stderr_is_terminal();
bool stdin_is_terminal();
int terminal_width();  // columns of stdout; 100 where it is not a terminal
bool colour_wanted();  // stdout is a terminal and NO_COLOR is not set

// True once Ctrl-C or a termination request came. The first one asks for an orderly end (outputs ramp to
// silence); a second one ends the process at once.
const std::atomic<bool>* stop_flag();
void install_stop_handler();

// Writes to stdout and flushes; throws UsageError when that fails (disk full, closed pipe), so that a
// truncated result never comes with a good exit status.
void print(const std::string& text);

// Now, as "2026-05-04T09:03:07Z".
std::string utc_now();

}  // namespace coldpin::app
