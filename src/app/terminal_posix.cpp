// The one file of the command line that asks the operating system about its terminal.
#include <csignal>
#include <cstdio>
#include <cstdlib>
#include <ctime>

#include "coldpin/units/error.h"

#include "terminal.h"

#if defined(_WIN32)
#include <io.h>
#else
#include <sys/ioctl.h>
#include <unistd.h>
#endif

namespace coldpin::app {

namespace {

std::atomic<bool> stop_requested{false};
static_assert(std::atomic<bool>::is_always_lock_free, "the handler may only touch lock-free atomics");

// A shell or a timer may send one request twice at once, to the group and to the process: only one that comes
// a second later means that the orderly end is not wanted.
std::atomic<std::time_t> first_request{0};

extern "C" void on_stop_signal(int) {
    const std::time_t now = std::time(nullptr);
    if (!stop_requested.exchange(true))
        first_request.store(now);
    else if (now - first_request.load() > 1)
        std::_Exit(3);
}

bool is_terminal(std::FILE* stream) {
#if defined(_WIN32)
    return _isatty(_fileno(stream)) != 0;
#else
    return isatty(fileno(stream)) != 0;
#endif
}

}  // namespace

bool stdout_is_terminal() {
    return is_terminal(stdout);
}
bool stderr_is_terminal() {
    return is_terminal(stderr);
}
bool stdin_is_terminal() {
    return is_terminal(stdin);
}

int terminal_width() {
#if !defined(_WIN32)
    winsize size{};
    if (stdout_is_terminal() && ioctl(STDOUT_FILENO, TIOCGWINSZ, &size) == 0 && size.ws_col > 0)
        return size.ws_col < 60 ? 60 : (size.ws_col > 120 ? 120 : size.ws_col);
#endif
    return 100;
}

bool colour_wanted() {
    const char* no_colour = std::getenv("NO_COLOR");  // the convention of no-color.org
    return stdout_is_terminal() && (no_colour == nullptr || *no_colour == '\0');
}

const std::atomic<bool>* stop_flag() {
    return &stop_requested;
}

void install_stop_handler() {
    std::signal(SIGINT, on_stop_signal);
    std::signal(SIGTERM, on_stop_signal);
#if !defined(_WIN32)
    std::signal(SIGPIPE, SIG_IGN);  // a closed pipe is an error of print(), not a sudden death
#endif
}

void print(const std::string& text) {
    const bool written = std::fwrite(text.data(), 1, text.size(), stdout) == text.size();
    if (!written || std::fflush(stdout) != 0)
        throw UsageError(
            "the result could not be written to standard output: is the disk full, or the pipe closed?");
}

std::string utc_now() {
    const std::time_t now = std::time(nullptr);
    std::tm utc{};
#if defined(_WIN32)
    gmtime_s(&utc, &now);
#else
    gmtime_r(&now, &utc);
#endif
    char text[32];
    std::strftime(text, sizeof text, "%Y-%m-%dT%H:%M:%SZ", &utc);
    return text;
}

}  // namespace coldpin::app
