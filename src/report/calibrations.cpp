#include "coldpin/report/calibrations.h"

#include <algorithm>
#include <cmath>

#include <fmt/core.h>

namespace coldpin::report {

namespace {

std::string or_blank(const std::optional<double>& value, int digits) {
    return value ? fmt::format("{:.{}f}", *value, digits) : "";
}

// The loop is known better than its volts: its change tells of knobs whatever the meter says.
std::string change_between(const rig::Calibration& before, const rig::Calibration& after) {
    const double output_db = after.output_full_scale_dbu - before.output_full_scale_dbu,
                 input_db = after.input_full_scale_dbu - before.input_full_scale_dbu;
    const double output_doubt = std::hypot(before.output_uncertainty_db, after.output_uncertainty_db),
                 input_doubt = std::hypot(before.input_uncertainty_db, after.input_uncertainty_db);
    std::string text;
    const auto add = [&](const char* what, double change, double doubt) {
        if (std::abs(change) <= doubt) return;
        text += fmt::format("{}{} {:+.2f} dB (± {:.2f})", text.empty() ? "" : ", ", what, change, doubt);
    };
    add("output", output_db, output_doubt);
    add("input", input_db, input_doubt);
    return text.empty() ? "no change beyond the uncertainty" : text;
}

}  // namespace

std::string calibrations_text(const std::vector<rig::Calibration>& calibrations) {
    if (calibrations.empty())
        return "No calibration is on record for this rig: coldpin calibrate makes the first.\n";
    std::string text =
        fmt::format("{:<22}{:>12}{:>8}{:>12}{:>8}{:>12}{:>12}  {}\n", "time (UTC)", "output dBu", "±",
                    "input dBu", "±", "loop noise", "latency", "since the one before");
    for (std::size_t k = 0; k < calibrations.size(); ++k) {
        const auto& one = calibrations[k];
        text += fmt::format("{:<22}{:>12.3f}{:>8.3f}{:>12.3f}{:>8.3f}{:>12}{:>12}  {}\n",
                            one.time_utc.empty() ? "by hand" : one.time_utc, one.output_full_scale_dbu,
                            one.output_uncertainty_db, one.input_full_scale_dbu, one.input_uncertainty_db,
                            or_blank(one.loop_noise_dbfs, 1), or_blank(one.loop_latency_frames, 2),
                            k == 0 ? "" : change_between(calibrations[k - 1], one));
    }
    if (calibrations.size() > 2)
        text +=
            fmt::format("Since the first: {}.\n", change_between(calibrations.front(), calibrations.back()));
    return text;
}

}  // namespace coldpin::report
