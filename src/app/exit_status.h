// Exit statuses, kept stable for scripts (docs/commands.md).
#pragma once

#include "coldpin/check/verdict.h"

namespace coldpin::app {

inline constexpr int exit_passed = 0;
inline constexpr int exit_failed = 1;
inline constexpr int exit_usage = 2;
inline constexpr int exit_cannot_measure = 3;
inline constexpr int exit_undecided = 4;

inline int exit_status(check::Verdict verdict) noexcept {
    switch (verdict) {
        case check::Verdict::pass:
            return exit_passed;
        case check::Verdict::fail:
            return exit_failed;
        case check::Verdict::undecided:
            break;
    }
    return exit_undecided;
}

}  // namespace coldpin::app
