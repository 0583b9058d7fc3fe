// The one file of this room that needs POSIX; elsewhere the chatter is left alone.
#include "stderr_silencer.h"

#if !defined(_WIN32)
#include <cstdio>

#include <fcntl.h>
#include <unistd.h>
#endif

namespace coldpin::rig {

#if defined(_WIN32)
StderrSilencer::StderrSilencer() = default;
StderrSilencer::~StderrSilencer() = default;
#else
StderrSilencer::StderrSilencer() {
    std::fflush(stderr);
    const int nowhere = open("/dev/null", O_WRONLY | O_CLOEXEC);
    if (nowhere < 0) return;
    kept_ = fcntl(STDERR_FILENO, F_DUPFD_CLOEXEC, 3);
    if (kept_ >= 0) dup2(nowhere, STDERR_FILENO);
    close(nowhere);
}

StderrSilencer::~StderrSilencer() {
    if (kept_ < 0) return;
    std::fflush(stderr);
    dup2(kept_, STDERR_FILENO);
    close(kept_);
}
#endif

}  // namespace coldpin::rig
