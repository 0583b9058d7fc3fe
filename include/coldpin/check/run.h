// A run: one unit measured once.
#pragma once

#include <string>
#include <vector>

#include "coldpin/check/analysis.h"
#include "coldpin/check/verdict.h"
#include "coldpin/measure/figure.h"
#include "coldpin/profile/device_profile.h"
#include "coldpin/profile/rig_file.h"

namespace coldpin::check {

// One plan step carried out: which captures (indices into Run::captures) it was measured from, what it gave.
struct StepResult {
    std::size_t plan_step = 0;  // index into the profile's plan
    std::string measure;
    std::string setting;
    std::string unit_channel;
    std::vector<std::size_t> captures;
    measure::Findings findings;
    std::string failure;  // why the step gave nothing; empty when it did
};

struct RunCapture {
    DescribedRecording take;  // name: file stem in recordings/
    int takes = 1;
};

struct Run {
    std::string tool_version;
    std::string time_utc;  // ISO 8601, start
    std::string serial;
    std::string operator_name;
    std::string notes;
    std::vector<std::string> tags;
    profile::DeviceProfile profile;
    profile::RigFile rig;
    std::string backend;  // description of the audio path as opened
    std::vector<RunCapture> captures;
    std::vector<StepResult> steps;
    std::vector<Judgement> judgements;
    Verdict verdict = Verdict::undecided;
    std::vector<std::string> cautions;
    double wall_time_s = 0.0;
};

}  // namespace coldpin::check
