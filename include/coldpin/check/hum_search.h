// Where does the hum come in? Four captures, each with one thing more connected.
#pragma once

#include <optional>
#include <string>
#include <vector>

#include "coldpin/check/perform.h"
#include "coldpin/measure/figure.h"
#include "coldpin/rig/session.h"

namespace coldpin::check {

enum class HumPlace {
    interface,    // inputs terminated: heard without any unit
    ground_loop,  // added when the unit is connected but off: a current through shields and the computer
    unit,         // added when the unit is on, its input terminated
    fixture,      // added when the generator is connected and muted
};
std::string hum_place_name(HumPlace place);  // "ground_loop"

struct HumStep {
    HumPlace place = HumPlace::interface;
    measure::Findings findings;     // of kind "hum"
    std::optional<double> level;    // hum_output of this step, dBu or dBFS, when some stands out
    std::optional<double> at_most;  // otherwise its bound
    double uncertainty_db = 0.0;
    std::optional<double>
        added;  // what this step adds, as power; absent when it adds nothing that stands out
};

struct HumSearchReport {
    std::vector<HumStep> steps;
    std::optional<HumPlace>
        most;  // where most of it enters; absent when there is none, or no step stands out
    std::vector<std::string> sentences;
    measure::Findings
        findings;  // kind "hum_search": hum_added with conditions.place, hum_output with conditions.step
};

struct HumSearchOptions {
    double length_s = 3.0;
    std::optional<double> mains_hz;
    std::string setting;  // of the unit's gain control, for the instructions and the simulated unit
};

// Asks for each wiring in turn (cautions are the caller's), plays nothing. Throws as Session.
HumSearchReport search_hum(rig::Session& session, Bench& bench, const HumSearchOptions& options);

}  // namespace coldpin::check
