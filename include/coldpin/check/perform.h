// A plan carried out: capture, measure, judge.
#pragma once

#include <functional>
#include <string>
#include <vector>

#include "coldpin/check/run.h"
#include "coldpin/rig/session.h"

namespace coldpin::check {

// The person (or page) at the bench. Called from the thread that performs.
class Bench {
  public:
    virtual ~Bench() = default;
    // Asks for a change at the bench ("Move the plug from ... to ..."); returns when done, throws UsageError
    // when nobody can answer.
    virtual void ask(const std::string& instruction) = 0;
    // Asks for something to be typed; returns it as typed. The default has nobody to type: UsageError.
    virtual std::string answer(const std::string& question);
    // What happens now, and how far: step of steps.
    virtual void progress(const std::string& what, std::size_t step, std::size_t steps) = 0;
};

struct RunDetails {
    std::string tool_version;
    std::string time_utc;
    std::string serial;
    std::string operator_name;
    std::string notes;
    std::vector<std::string> tags;
    bool preflight = true;  // look at wiring and path before anything is measured
    bool auto_level =
        false;  // at each setting the highest drive that clips nothing, where the plan names none
    bool accept_path = false;  // measure although the path is not honest; the run says so
};

// The captures a profile needs on a rig, in the order that changes cables and knobs as seldom as possible,
// each shared by all steps that can use it.
struct PlannedCapture {
    rig::CaptureRequest request;
    std::string unit_channel;
};
struct PlannedStep {
    std::size_t plan_step = 0;
    std::string unit_channel;
    std::string setting;
    std::vector<std::size_t> captures;  // indices into CapturePlan::captures
};
struct CapturePlan {
    std::vector<PlannedCapture> captures;
    std::vector<PlannedStep> steps;  // gain first within a setting, since noise and hum refer to it
    std::vector<std::string>
        changes;  // what a person must do after the first set-up, in order; empty: nothing
};

// Throws UsageError when a level exceeds the rig's limits or cannot be reached: before anything is played.
CapturePlan plan_captures(const profile::DeviceProfile& profile, const rig::Session& session);

// Carries everything out, after a look at wiring and path (within two seconds; not for stored takes). Throws
// CannotMeasure when nothing could be measured or would come out wrong, and what the session throws; a step
// whose measurement is refused (CannotMeasure) is kept with its reason and its requirements are undecided.
Run perform(const profile::DeviceProfile& profile, const profile::RigFile& rig, rig::Session& session,
            Bench& bench, const RunDetails& details);

// Measures and judges again from the recordings a run holds; same samples in, same numbers out.
void analyse_again(Run& run);

}  // namespace coldpin::check
