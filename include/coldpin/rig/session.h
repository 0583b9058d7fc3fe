// Captures on a rig: levels in dBu at the preamp, ramps, limits, content checks, retakes.
#pragma once

#include <atomic>
#include <functional>
#include <memory>
#include <optional>
#include <span>
#include <string>
#include <vector>

#include "coldpin/rig/backend.h"
#include "coldpin/rig/content_check.h"
#include "coldpin/rig/path_check.h"
#include "coldpin/rig/setup.h"
#include "coldpin/signal/description.h"
#include "coldpin/signal/recording.h"
#include "coldpin/units/error.h"

namespace coldpin::rig {

// The interface's input was at its end stop. A plan may try again with less drive.
class InputClipped : public CannotMeasure {
  public:
    using CannotMeasure::CannotMeasure;
};

struct CaptureRequest {
    std::string label;  // names recordings: "gain-40dB"
    Feed feed = Feed::differential;
    signal::Stimulus stimulus;  // level_dbfs and rate_hz are set by the session from drive_dbu and the rig
    double drive_dbu =
        -60.0;              // at the preamp's input: differential or common mode by `feed`; unused when idle
    double settle_s = 0.0;  // silence recorded and thrown away before
    Wiring wiring;          // must be in force (Session::prepare)
    int device_input = 1;
    std::optional<double> expected_gain_db;  // differential, for the limit at the preamp's output
    std::optional<double> gain_db;           // measured at this setting, for the description
    std::optional<double> gain_uncertainty_db;
};

// A recording with everything needed to measure from it: what was played, volts, wiring. The recording's
// channels: the device's output first, then the reference if wired.
struct Capture {
    std::string label;
    signal::Recording recording;
    signal::Description description;
    int takes = 1;  // 2 and more: damaged ones were thrown away
};

class Session {
  public:
    // `stop` (may be null) ends a capture early with CannotMeasure("interrupted").
    Session(Setup setup, std::unique_ptr<Backend> backend, const std::atomic<bool>* stop = nullptr);

    const Setup& setup() const noexcept { return setup_; }
    std::string backend_description() const { return backend_->description(); }

    // Converter level for a drive at the preamp's input. Throws UsageError when the rig is not calibrated.
    double converter_level_dbfs(Feed feed, double drive_dbu) const;

    // The wiring that a feed needs on this rig.
    Wiring wiring_for(Feed feed, const std::string& setting, const std::string& unit_channel) const;

    // True when the wiring is in force or the back end brought it about; false: a person must, then
    // confirm().
    bool prepare(const Wiring& wiring);
    void confirm(const Wiring& wiring);

    // Plays and records, checks the content, takes a damaged capture again up to three times, then throws
    // CannotMeasure with the reason. Clipping at the converter also throws, saying what to turn down.
    Capture capture(const CaptureRequest& request);

    // Samples as they are on one output, every other one silent; what each input channel from 1 to `inputs`
    // heard, from the first frame on. For calibrating and path checks: no ramps, no retakes. Throws
    // UsageError for samples beyond full scale, peaks beyond the rig's limits at the preamp's input, or
    // wiring that was not prepared.
    signal::Recording play_raw(int output, std::span<const double> samples, int inputs);
    // The same on several outputs at once: one list of samples each, output 1 first, all of one length.
    signal::Recording play_raw(const std::vector<std::vector<double>>& outputs, int inputs);

    // A tone that goes on until `stop`, for a meter. Returns at once on a simulated rig that does not keep
    // time.
    void play_tone_until(const std::atomic<bool>& stop, int output, double frequency_hz, double level_dbfs);

    // The path probe on the differential output at that converter level, heard by the reference input (or, in
    // a loop, by the device's input). Within a second. Throws UsageError without a reference input outside a
    // loop.
    PathReport check_path(double level_dbfs);

    // Steady clocks that differ: every later capture's description says so. Nothing: one clock.
    void set_clock_ppm(std::optional<double> ppm) { clock_ppm_ = ppm; }

    // Throws UsageError when the request would exceed a limit of the rig or cannot be reached by its
    // converter. capture() asks this first; a plan asks it for everything before anything is played.
    void require_within_limits(const CaptureRequest& request) const;

  private:
    // Whatever is asked for, as samples or as a tone: the limits at the preamp's input hold.
    void require_peak_within_limits(int output, double peak) const;
    signal::Description description_for(const CaptureRequest& request,
                                        const signal::Stimulus& stimulus) const;

    Setup setup_;
    std::unique_ptr<Backend> backend_;
    const std::atomic<bool>* stop_;
    std::optional<Wiring> wiring_;
    std::optional<double> clock_ppm_;
};

}  // namespace coldpin::rig
