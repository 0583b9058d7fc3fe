// The one file of this room that needs POSIX; elsewhere the chatter is left alone.
#include "stderr_silencer.h"

#if !defined(_WIN32)
#include <atomic>
#include <cstdio>

#include <fcntl.h>
#include <unistd.h>
#endif

namespace coldpin::rig {

#if defined(_WIN32)
StderrSilencer::StderrSilencer() = default;
StderrSilencer::~StderrSilencer() = default;
void StderrSilencer::lift() noexcept {}
#else
namespace {
std::atomic<int> outermost{-1};  // the real stderr, while it is silenced
}  // namespace

StderrSilencer::StderrSilencer() {
    std::fflush(stderr);
    const int nowhere = open("/dev/null", O_WRONLY | O_CLOEXEC);
    if (nowhere < 0) return;
    kept_ = fcntl(STDERR_FILENO, F_DUPFD_CLOEXEC, 3);
    if (kept_ >= 0) {
        int none = -1;
        outermost.compare_exchange_strong(none, kept_);
        dup2(nowhere, STDERR_FILENO);
    }
    close(nowhere);
}

StderrSilencer::~StderrSilencer() {
    if (kept_ < 0) return;
    std::fflush(stderr);
    dup2(kept_, STDERR_FILENO);
    int mine = kept_;
    outermost.compare_exchange_strong(mine, -1);
    close(kept_);
}

void StderrSilencer::lift() noexcept {
    const int real = outermost.load();
    if (real >= 0) dup2(real, STDERR_FILENO);
}
#endif

}  // namespace coldpin::rig
