// The person at the bench, reached through the terminal.
#pragma once

#include <string>

#include "coldpin/check/perform.h"

namespace coldpin::app {

class TerminalBench : public check::Bench {
  public:
    // `yes`: nothing may be asked; ask() then throws UsageError.
    explicit TerminalBench(bool yes) : yes_(yes) {}
    ~TerminalBench() override;
    TerminalBench(const TerminalBench&) = delete;
    TerminalBench& operator=(const TerminalBench&) = delete;
    void ask(const std::string& instruction) override;
    std::string answer(const std::string& question) override;
    void progress(const std::string& what, std::size_t step, std::size_t steps) override;

    // Takes the progress line away.
    void clear() { clear_progress(); }

  private:
    void clear_progress();
    std::string read_line(const std::string& asked);
    bool yes_;
    bool progress_shown_ = false;
};

}  // namespace coldpin::app
