// Before a run: is the bench wired as it should be? One second that saves a session.
#pragma once

#include <optional>
#include <string>
#include <vector>

#include "coldpin/profile/device_profile.h"
#include "coldpin/rig/session.h"

namespace coldpin::check {

enum class WiringFault {
    input_dead,                // exact zeros where the unit should be
    unit_silent,               // neither signal nor noise: off, or its output not connected
    feed_not_reaching,         // the unit's noise is there, the test signal is not
    wrong_socket,              // the unit's output arrives at another input
    too_loud,                  // something clips
    leg_open,                  // 6 dB low and no rejection
    legs_swapped,              // upside down
    wrong_setting,             // the gain of another setting
    wrong_pad,                 // off by what pads are off by
    gain_off,                  // off, and nothing says why
    common_mode_not_reaching,  // more rejection than the fixture could show
};
std::string wiring_fault_name(WiringFault fault);

struct WiringFinding {
    WiringFault fault = WiringFault::unit_silent;
    std::string sentence;  // what was found, what to do
    bool spoils = false;   // nothing can be measured until it is put right; otherwise the run says it too
};

struct WiringReport {
    std::vector<WiringFinding> findings;
    std::optional<double> gain_db;       // as seen in passing
    std::optional<double> rejection_db;  // at 997 Hz, at least
    int polarity = 0;                    // 0: not told
    const WiringFinding* finding(WiringFault fault) const;
};

// Plays some silence, a short sweep through the pad and a short tone through the feed, 20 dB below the level
// of the run, in one take of under a second; the wiring of the first capture must be in force. Nothing is
// guessed: where the evidence would fit two causes both are named, where it is thin nothing is said. Throws
// as Session.
WiringReport preflight(rig::Session& session, const profile::DeviceProfile& profile,
                       const std::string& setting, int device_input);

}  // namespace coldpin::check
