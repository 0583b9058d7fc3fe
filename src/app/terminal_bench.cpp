#include "terminal_bench.h"

#include <cstdio>
#include <string>

#include <fmt/core.h>

#include "coldpin/units/error.h"

#include "terminal.h"

namespace coldpin::app {

TerminalBench::~TerminalBench() {
    clear_progress();
}

void TerminalBench::clear_progress() {
    if (progress_shown_) fmt::print(stderr, "\r\033[K");
    progress_shown_ = false;
    std::fflush(stderr);
}

void TerminalBench::ask(const std::string& instruction) {
    clear_progress();
    if (yes_)
        throw UsageError(fmt::format(
            "this plan needs a hand at the bench, and --yes says that nobody is asked: \"{}\"\n"
            "Leave --yes out, or use a rig with an output for the pad and one for the common-mode feed.",
            instruction));
    fmt::print(stderr, "\n  {}\n  Then press Enter (Ctrl-C to give up): ", instruction);
    std::fflush(stderr);
    read_line(instruction);
}

std::string TerminalBench::answer(const std::string& question) {
    clear_progress();
    if (yes_)
        throw UsageError(
            fmt::format("--yes says that nobody is asked, but this needs an answer: \"{}\"", question));
    fmt::print(stderr, "\n  {}\n  > ", question);
    std::fflush(stderr);
    return read_line(question);
}

std::string TerminalBench::read_line(const std::string& asked) {
    std::string line;
    int c = 0;
    while ((c = std::getchar()) != '\n' && c != EOF) line += static_cast<char>(c);
    if (c != EOF || !line.empty()) return line;
    if (stop_flag()->load()) throw CannotMeasure("interrupted: nothing was kept, the outputs are silent");
    throw UsageError(fmt::format("nobody answered (standard input has ended) when asked: \"{}\"", asked));
}

void TerminalBench::progress(const std::string& what, std::size_t step, std::size_t steps) {
    if (!stderr_is_terminal()) return;
    constexpr std::size_t cells = 24;
    const std::size_t full = steps == 0 ? 0 : cells * step / steps;
    std::string bar;
    for (std::size_t i = 0; i < cells; ++i) bar += i < full ? "━" : "─";
    fmt::print(stderr, "\r\033[K  {}  {} of {}  {}", bar, step, steps, what);
    std::fflush(stderr);
    progress_shown_ = true;
}

}  // namespace coldpin::app
