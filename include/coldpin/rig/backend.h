// Playing and recording at once, over interchangeable back ends.
#pragma once

#include <atomic>
#include <cstddef>
#include <memory>
#include <optional>
#include <string>
#include <vector>

#include "coldpin/rig/setup.h"

namespace coldpin::rig {

// How the preamp's input is fed: through the differential pad, through the common-mode feed, or not at all
// (outputs silent, everything stays connected).
enum class Feed { differential, common_mode, idle };
std::string feed_name(Feed feed);  // "differential", "common-mode", "idle"
std::optional<Feed> feed_from_name(const std::string& name);

// Everything a hand would have to change: which plug sits where, how the unit stands.
enum class Plug {
    differential_pad,
    common_mode_feed,
    both,
    loop_differential,  // the differential output straight into the device's input
    loop_common_mode,   // the common-mode output straight into the device's input
    input_terminated,   // a resistor in the device's input, the unit unplugged
    unit_off,           // the unit's output in the device's input, the unit switched off
    unit_terminated,    // the unit on, a resistor at its input
};
struct Wiring {
    Plug plug = Plug::both;    // `both` when the rig has an output for each
    std::string setting;       // of the gain control; empty when there is only one
    std::string unit_channel;  // of the device under test; empty when there is only one
    bool operator==(const Wiring&) const = default;
};

// One take: planar float32 per output channel of the device (index 0 is output 1), all of one length; as many
// frames are recorded as are played, so the caller pads for latency.
struct TakeRequest {
    double rate_hz = 48000.0;
    std::vector<std::vector<float>> play;
    int input_channels = 1;
    Feed feed = Feed::idle;  // tells the simulated and stored back ends what a rig's wires would
    std::string label;       // names the take for the stored back end
};

struct Take {
    std::vector<std::vector<float>> recorded;  // planar, input channel 1 first, bits as the driver gave them
    std::vector<std::string> driver_flags;     // for people: what the driver reported, with frame numbers
};

class Backend {
  public:
    virtual ~Backend() = default;
    // Blocks until played and recorded. Throws CannotMeasure when the device is missing, does not start,
    // stalls or vanishes, or when `stop` (may be null) became true; outputs are silent afterwards.
    virtual Take play_and_record(const TakeRequest& request, const std::atomic<bool>* stop) = 0;
    // Brings the wiring about by itself (simulated, stored) and returns true, or returns false: ask a person.
    virtual bool rewire(const Wiring& wiring) = 0;
    virtual std::string description() const = 0;  // for reports: host API, device, rate
};

// Throws CannotMeasure for a device that is not there (naming those that are), UsageError for unfit channels
// or rate; CannotMeasure when the audio system does not answer.
std::unique_ptr<Backend> open_backend(const Setup& setup);

// A stream whose server died cannot be closed without hanging for minutes; it is then left behind and this
// is true: leave the process by std::_Exit after flushing.
bool teardown_was_abandoned() noexcept;

}  // namespace coldpin::rig
