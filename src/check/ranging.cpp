#include "coldpin/check/ranging.h"

#include <algorithm>
#include <cmath>
#include <optional>
#include <utility>

#include <fmt/core.h>

#include "coldpin/measure/clipping.h"
#include "coldpin/spectrum/sine_fit.h"
#include "coldpin/units/error.h"
#include "coldpin/units/level.h"
#include "coldpin/units/physics.h"

namespace coldpin::check {

namespace {

constexpr double tone_hz = 997.0;
constexpr double tone_s = 0.25, tail_s = 0.15;
constexpr double margin_db = 3.0;
constexpr double most_distortion = 0.01, most_compression_db = 0.5;
constexpr int most_captures = 4;
constexpr double least_heard_dbfs = -100.0;

struct Look {
    double level_dbfs = -300.0;
    double distortion = 0.0;
    bool clips = false;
};

Look look_at(rig::Session& session, int input, double drive_dbu) {
    const double rate = session.setup().audio.sample_rate_hz;
    signal::Stimulus tone;
    tone.kind = signal::Tone{tone_hz};
    tone.length_s = tone_s;
    tone.rate_hz = rate;
    tone.level_dbfs = session.converter_level_dbfs(rig::Feed::differential, drive_dbu);
    auto samples = signal::render(tone);
    samples.resize(samples.size() + static_cast<std::size_t>(tail_s * rate), 0.0);
    const auto heard = session.play_raw(session.setup().routing.differential_output, samples, input);
    const auto channel = heard.channel(input);
    // The loudest stretch of half the tone's length, wherever latency put it.
    const auto length = static_cast<std::size_t>(0.5 * tone_s * rate), hop = length / 8;
    std::size_t best = 0;
    double most = -1.0;
    for (std::size_t at = 0; at + length <= channel.size(); at += hop) {
        double sum = 0.0;
        for (double x : channel.subspan(at, length)) sum += x * x;
        if (sum > most) {
            most = sum;
            best = at;
        }
    }
    std::vector<double> frequencies;
    for (int number = 1; number <= 5; ++number)
        if (number * tone_hz < 0.45 * rate) frequencies.push_back(number * tone_hz);
    const auto fit = spectrum::fit_sines(channel.subspan(best, length), rate, frequencies);
    Look look;
    const double fundamental = std::abs(fit.phasors.front());
    double harmonics = 0.0;
    for (std::size_t k = 1; k < fit.phasors.size(); ++k) harmonics += std::norm(fit.phasors[k]);
    look.level_dbfs = units::db_from_ratio(fundamental + 1e-15);
    look.distortion = std::sqrt(harmonics) / (fundamental + 1e-15);
    look.clips = measure::find_clipping(channel).samples_at_full_scale >= 2;

    return look;
}

// What the drive may be at most, each with its reason, once the gain is known.
std::pair<double, std::string> ceiling(const rig::Session& session, std::optional<double> gain_db) {
    const rig::Setup& setup = session.setup();
    std::pair<double, std::string> least = {-0.5 - session.converter_level_dbfs(rig::Feed::differential, 0.0),
                                            "the interface's output"};
    const auto offer = [&](double drive, const char* why) {
        if (drive < least.first) least = {drive, why};
    };
    if (setup.limits.max_preamp_input_dbu)
        offer(*setup.limits.max_preamp_input_dbu, "the rig's limit at the preamp's input");
    if (gain_db) {
        offer(setup.calibration->input_full_scale_dbu - margin_db - *gain_db, "the interface's input");
        if (setup.limits.max_preamp_output_dbu)
            offer(*setup.limits.max_preamp_output_dbu - *gain_db, "the rig's limit at the preamp's output");
    }
    return least;
}

void say_what_decides(DriveRange& range, const rig::Session& session, double gain_db, double distortion) {
    const rig::Setup& setup = session.setup();
    const auto& calibration = *setup.calibration;
    const double spare_db = calibration.input_full_scale_dbu - margin_db - range.output_dbu;
    if (calibration.loop_noise_dbfs) {
        // The source's thermal noise through the gain is the least that a unit can make.
        const double unit_dbu = units::dbu_from_volts_rms(units::thermal_noise_volts(
                                    std::max(1.0, setup.fixture.source_ohms),
                                    units::celsius_zero_k + setup.temperature_c, 19980.0)) +
                                gain_db;
        const double interface_dbu = *calibration.loop_noise_dbfs + calibration.input_full_scale_dbu;
        if (interface_dbu > unit_dbu - 10.0) {
            const double help_db = std::min(spare_db, interface_dbu - unit_dbu + 10.0);
            range.sentences.push_back(fmt::format(
                "At this gain the interface's noise ({:.0f} dBu) may decide the noise figures, not the "
                "unit's ({:.0f} dBu at "
                "least).{}",
                interface_dbu, unit_dbu,
                help_db > 1.0
                    ? fmt::format(
                          " Turning the interface's input up by {:.0f} dB, and calibrating again, would "
                          "help by up to as much.",
                          help_db)
                    : " Its input cannot be turned up without clipping: measure noise at a higher gain."));
        }
    }
    if (calibration.loop_distortion_db &&
        units::db_from_ratio(distortion + 1e-12) < *calibration.loop_distortion_db + 10.0)
        range.sentences.push_back(
            fmt::format("Distortion at this level ({:.0f} dB) is near the interface's own ({:.0f} dB): it "
                        "bounds the unit's, no more.",
                        units::db_from_ratio(distortion + 1e-12), *calibration.loop_distortion_db));
}

}  // namespace

DriveRange find_drive(rig::Session& session, int device_input, double start_dbu) {
    if (!session.setup().calibration)
        throw UsageError("the rig is not calibrated: run coldpin calibrate, or fill in [calibration]");
    const auto& calibration = *session.setup().calibration;
    const auto first_ceiling = ceiling(session, std::nullopt);
    if (start_dbu > first_ceiling.first + 1e-9)
        throw UsageError(fmt::format("a start at {:.1f} dBu is above {} ({:.1f} dBu)", start_dbu,
                                     first_ceiling.second, first_ceiling.first));
    DriveRange range;
    double drive = start_dbu, sound_distortion = 0.0;
    std::optional<double> gain_db, sound_drive, lowest_bad;
    for (range.captures = 1;; ++range.captures) {
        const Look look = look_at(session, device_input, drive);
        const double output_dbu = look.level_dbfs + calibration.input_full_scale_dbu;
        if (range.captures == 1 && look.level_dbfs < least_heard_dbfs)
            throw CannotMeasure(
                "nothing of the test tone comes through: look at the wiring and the unit's supply");
        const bool bad = look.clips || look.distortion > most_distortion ||
                         (gain_db && output_dbu - drive < *gain_db - most_compression_db);
        if (bad) {
            lowest_bad = lowest_bad ? std::min(*lowest_bad, drive) : drive;
            range.limited_by = look.clips ? "the interface's input" : "the unit, which begins to clip";
        } else if (!sound_drive || drive > *sound_drive) {
            if (!gain_db) gain_db = output_dbu - drive;
            sound_drive = drive;
            sound_distortion = look.distortion;
        }
        if (range.captures == most_captures) break;
        if (!gain_db) {
            drive -= 30.0;  // even the start is too much: the gain is higher than was thought
            continue;
        }
        const auto most = ceiling(session, gain_db);
        if (bad) {
            // What is left of a clipped tone shows where it clips: its fundamental lies up to 2.1 dB above
            // the stop.
            drive = std::min(*lowest_bad - margin_db, output_dbu - *gain_db - 2.1 - margin_db);
        } else {
            drive = lowest_bad ? std::min(most.first, *lowest_bad - margin_db) : most.first;
        }
        if (drive <= *sound_drive + 0.5) {
            if (!lowest_bad) range.limited_by = most.second;
            break;
        }
    }
    if (!sound_drive)
        throw CannotMeasure(
            fmt::format("the unit or the interface's input clips even at {:.0f} dBu: turn the unit's gain or "
                        "the interface's input down",
                        drive));
    if (!lowest_bad && range.limited_by.empty()) range.limited_by = ceiling(session, gain_db).second;
    // The margin lies below what clips; a limit of the rig is a limit without one.
    range.drive_dbu = lowest_bad ? std::min(*sound_drive, *lowest_bad - margin_db) : *sound_drive;
    range.output_dbu = range.drive_dbu + *gain_db;
    say_what_decides(range, session, *gain_db, sound_distortion);
    return range;
}

}  // namespace coldpin::check
