#include "reading_agreement.h"

#include <cmath>
#include <string>
#include <utility>

#include <fmt/core.h>

#include "coldpin/units/error.h"

namespace coldpin::check {

namespace {

constexpr double least_full_scale_dbu = -60.0, most_full_scale_dbu = 36.0;

}  // namespace

void require_agreement(const rig::Calibration& now, const std::optional<rig::Calibration>& before,
                       double volts_rms) {
    if (now.input_full_scale_dbu < least_full_scale_dbu || now.input_full_scale_dbu > most_full_scale_dbu)
        throw UsageError(
            fmt::format("the reading contradicts the loop: with {:.4g} V at the output the input's full "
                        "scale would be {:+.1f} dBu. "
                        "Read AC volts across pins 2 and 3, at the output, with the tone playing. The "
                        "calibration before stays "
                        "valid.",
                        volts_rms, now.input_full_scale_dbu));
    if (!before || before->time_utc.empty()) return;
    const double output_db = now.output_full_scale_dbu - before->output_full_scale_dbu;
    const double loop_db = (now.output_full_scale_dbu - now.input_full_scale_dbu) -
                           (before->output_full_scale_dbu - before->input_full_scale_dbu);
    constexpr double same_db = 0.1, other_db = 1.0;
    if (std::abs(loop_db) > same_db || std::abs(output_db) < other_db) return;
    std::string likely = "the wrong range or place";
    for (const auto& [db, cause] : {std::pair{-6.02, "one leg against pin 1 instead of across both"},
                                    {6.02, "across both legs, where one leg against pin 1 was read before"},
                                    {3.01, "a peak value instead of RMS"},
                                    {9.03, "a peak-to-peak value instead of RMS"}})
        if (std::abs(output_db - db) < 0.3) likely = cause;
    throw UsageError(
        fmt::format("the reading contradicts the loop: output to input is as it was within {:.2f} dB, "
                    "yet the reading says that the "
                    "output changed by {:+.1f} dB ({}). Read again; if both knobs really moved alike, "
                    "add --accept-reading. The "
                    "calibration before stays valid.",
                    std::abs(loop_db), output_db, likely));
}

}  // namespace coldpin::check
