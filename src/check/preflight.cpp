#include "coldpin/check/preflight.h"

#include <algorithm>
#include <cmath>

#include <fmt/core.h>

#include "coldpin/measure/clipping.h"
#include "coldpin/measure/timing.h"
#include "coldpin/measure/transfer.h"
#include "coldpin/spectrum/averaged_spectrum.h"
#include "coldpin/spectrum/sine_fit.h"
#include "coldpin/units/error.h"
#include "coldpin/units/level.h"
#include "coldpin/units/physics.h"

namespace coldpin::check {

namespace {

constexpr double quiet_output_dbu = -16.0;  // 20 dB below a run's usual level
constexpr double harmless_drive_dbu = -60.0;
constexpr double common_mode_drive_dbu = -20.0;
constexpr double silence_s = 0.25, sweep_s = 0.30, gap_s = 0.12, tone_s = 0.20, tail_s = 0.12, lead_s = 0.05;
constexpr double tone_hz = 997.0;
constexpr double half_db = 6.0206;  // one leg of two

// Where the parts lie in the take, in frames, and what was played.
struct Plan {
    std::size_t silence_begin = 0, silence_end = 0, sweep_begin = 0, tone_begin = 0, tone_end = 0, frames = 0;
    signal::Stimulus sweep;
    double drive_dbu = 0.0, common_dbu = 0.0;
    bool with_common_mode = false;
};

double band_rms(std::span<const double> samples, double rate_hz) {
    const auto spectrum = spectrum::averaged_spectrum(samples, rate_hz, {8192, 0.5, spectrum::Window::hann});
    return std::sqrt(
        spectrum::band_power(spectrum, 300.0, 0.4 * rate_hz, [](double) { return 1.0; }).mean_square);
}

bool all_zero(std::span<const double> samples) {
    return std::all_of(samples.begin(), samples.end(), [](double x) { return x == 0.0; });
}

bool clips(std::span<const double> samples) {
    return measure::find_clipping(samples).samples_at_full_scale >= 2;
}

class Preflight {
  public:
    Preflight(rig::Session& session, const profile::DeviceProfile& profile, const std::string& setting,
              int device_input)
        : session_(session),
          setup_(session.setup()),
          profile_(profile),
          setting_(setting),
          input_(device_input),
          rate_(setup_.audio.sample_rate_hz) {
        const auto* found = profile.find_setting(setting);
        if (found != nullptr) expected_db_ = found->nominal_gain_db;
    }

    WiringReport report() {
        play();
        const auto device = heard_.channel(input_);
        if (all_zero(device)) {
            add(WiringFault::input_dead,
                fmt::format("Input {} gives exact zeros: it is off, muted, unplugged from the computer, or "
                            "the operating "
                            "system does not let programs record.",
                            input_),
                true);
            return report_;
        }
        const bool loud = clips(part(device, 0, plan_.tone_begin - frames(0.5 * gap_s)));
        if (loud) {
            add(WiringFault::too_loud,
                fmt::format("Input {} clips although the test signal is 20 dB below the run's: turn the "
                            "input or the unit "
                            "down, or something else is playing.",
                            input_),
                true);
            return report_;
        }
        if (!find_gain(device)) {
            explain_silence(device);
            return report_;
        }
        find_rejection(device);
        judge_gain();
        judge_polarity();
        return report_;
    }

  private:
    void add(WiringFault fault, std::string sentence, bool spoils) {
        report_.findings.push_back({fault, std::move(sentence), spoils});
    }
    std::size_t frames(double seconds) const { return static_cast<std::size_t>(seconds * rate_); }
    static std::span<const double> part(std::span<const double> samples, std::size_t begin, std::size_t end) {
        return samples.subspan(begin, std::min(end, samples.size()) - begin);
    }

    double allowed_drive() const {
        double drive = expected_db_ ? quiet_output_dbu - *expected_db_ : harmless_drive_dbu;
        drive = std::min(drive, -1.0 - session_.converter_level_dbfs(rig::Feed::differential, 0.0));
        if (setup_.limits.max_preamp_input_dbu) drive = std::min(drive, *setup_.limits.max_preamp_input_dbu);
        return drive;
    }

    void play() {
        const auto& routing = setup_.routing;
        plan_.drive_dbu = allowed_drive();
        plan_.with_common_mode = routing.common_mode_output.has_value();
        plan_.sweep.kind = signal::Sweep{60.0, std::min(20000.0, 0.45 * rate_)};
        plan_.sweep.length_s = sweep_s;
        plan_.sweep.rate_hz = rate_;
        plan_.sweep.level_dbfs = session_.converter_level_dbfs(rig::Feed::differential, plan_.drive_dbu);
        plan_.silence_begin = frames(lead_s);
        plan_.silence_end = plan_.silence_begin + frames(silence_s);
        plan_.sweep_begin = plan_.silence_end + frames(0.01);
        plan_.tone_begin = plan_.sweep_begin + signal::frame_count(plan_.sweep) + frames(gap_s);
        plan_.tone_end = plan_.tone_begin + (plan_.with_common_mode ? frames(tone_s) : 0);
        plan_.frames = plan_.tone_end + frames(tail_s);
        const int outputs = std::max(routing.differential_output, routing.common_mode_output.value_or(1));
        std::vector<std::vector<double>> play(static_cast<std::size_t>(outputs),
                                              std::vector<double>(plan_.frames, 0.0));
        sent_.assign(plan_.frames, 0.0);
        const auto swept = signal::render(plan_.sweep);
        std::copy(swept.begin(), swept.end(), sent_.begin() + static_cast<std::ptrdiff_t>(plan_.sweep_begin));
        play[static_cast<std::size_t>(routing.differential_output) - 1] = sent_;
        if (plan_.with_common_mode) {
            plan_.common_dbu =
                std::min(common_mode_drive_dbu,
                         setup_.limits.max_preamp_common_mode_dbu.value_or(common_mode_drive_dbu));
            signal::Stimulus tone;
            tone.kind = signal::Tone{tone_hz};
            tone.length_s = tone_s;
            tone.rate_hz = rate_;
            tone.level_dbfs =
                std::min(-1.0, session_.converter_level_dbfs(rig::Feed::common_mode, plan_.common_dbu));
            plan_.common_dbu = tone.level_dbfs - session_.converter_level_dbfs(rig::Feed::common_mode, 0.0);
            const auto rendered = signal::render(tone);
            std::copy(rendered.begin(), rendered.end(),
                      play[static_cast<std::size_t>(*routing.common_mode_output) - 1].begin() +
                          static_cast<std::ptrdiff_t>(plan_.tone_begin));
        }
        int inputs = std::max(input_, routing.reference_input.value_or(1));
        for (int one : routing.device_inputs) inputs = std::max(inputs, one);
        heard_ = session_.play_raw(play, inputs);
    }

    // Level in dBu at the unit's output over the drive; from the part of the take that holds the sweep alone.
    std::optional<double> gain_at(int input, double input_full_scale_dbu) {
        const std::size_t first = plan_.silence_begin, last = plan_.tone_begin;
        measure::TransferQuestion question;
        question.recording = part(heard_.channel(input), first, last);
        // Up to the sweep's own end: what follows is room for latency.
        const auto sent = part(sent_, first, plan_.sweep_begin + signal::frame_count(plan_.sweep));
        question.sent = sent;
        question.rate_hz = rate_;
        question.stimulus = plan_.sweep;
        try {
            const auto transfer = measure::transfer(question);
            latency_ = static_cast<std::size_t>(std::max(0.0, transfer.delay_frames));
            const double level_db = units::db_from_ratio(std::abs(transfer.at(tone_hz).value)) +
                                    plan_.sweep.level_dbfs + input_full_scale_dbu;
            return level_db - plan_.drive_dbu;
        } catch (const Error&) {
            return std::nullopt;
        }
    }

    // Of the sweep alone; for a transfer the samples as sent are the sweep's own.
    bool find_gain(std::span<const double> device) {
        report_.gain_db = gain_at(input_, setup_.calibration->input_full_scale_dbu);
        if (!report_.gain_db) return false;
        measure::TimingQuestion question;
        question.recording = part(device, plan_.silence_begin, plan_.tone_begin);
        question.rate_hz = rate_;
        question.stimulus = plan_.sweep;
        try {
            const auto findings = measure::polarity(question);
            if (const auto* figure = findings.figure("polarity"))
                report_.polarity = figure->value > 0.0 ? 1 : -1;
        } catch (const Error&) {
            report_.polarity = 0;  // thin evidence says nothing
        }
        return true;
    }

    // ---- nothing of the test signal is heard

    void explain_silence(std::span<const double> device) {
        const auto& routing = setup_.routing;
        for (int other : routing.device_inputs)
            if (other != input_ && gain_at(other, setup_.calibration->input_full_scale_dbu)) {
                add(WiringFault::wrong_socket,
                    fmt::format("The unit's output arrives at input {}, not at input {}: move the plug, or "
                                "the channel is "
                                "another one.",
                                other, input_),
                    true);
                return;
            }
        if (routing.reference_input && setup_.calibration->reference_full_scale_dbu && expected_db_) {
            // A tap hears the output's own level; the unit's output is far from that, at the unit's gain.
            const auto seen =
                gain_at(*routing.reference_input, *setup_.calibration->reference_full_scale_dbu);
            const double tap_db = setup_.fixture.differential_loss_db;
            if (seen && std::abs(*seen - *expected_db_) < 1.5 && std::abs(*seen - tap_db) > 3.0) {
                add(WiringFault::wrong_socket,
                    fmt::format(
                        "The unit's output sits in the reference input {}, not in input {}: move the plug.",
                        *routing.reference_input, input_),
                    true);
                return;
            }
            if (!seen) {
                add(WiringFault::feed_not_reaching,
                    fmt::format("Neither input {} nor the reference input {} hears the test signal: output "
                                "{} is silent "
                                "(muted, turned down, or the wrong number).",
                                input_, *routing.reference_input, routing.differential_output),
                    true);
                return;
            }
        }
        const double noise_dbfs = units::dbfs_from_sample_rms(
            band_rms(part(device, plan_.silence_begin, plan_.silence_end), rate_) + 1e-12);
        const auto floor_dbfs = interface_floor_dbfs();
        const double least_dbfs = least_unit_noise_dbfs();
        constexpr double clear_db = 3.0;
        if (floor_dbfs && noise_dbfs > *floor_dbfs + clear_db) {
            add(WiringFault::feed_not_reaching,
                fmt::format("The unit is on (its noise is heard), but nothing of the test signal comes "
                            "through: the plug at "
                            "its input, the pad, or output {}.",
                            routing.differential_output),
                true);
        } else if (floor_dbfs && least_dbfs > *floor_dbfs + clear_db) {
            add(WiringFault::unit_silent,
                fmt::format("Neither signal nor noise comes from the unit: it is off, or its output is not "
                            "connected to "
                            "input {}.",
                            input_),
                true);
        } else {
            add(WiringFault::unit_silent,
                fmt::format("Nothing of the test signal comes through. The unit's noise would hide under the "
                            "interface's, so "
                            "it cannot be told which: unit off, its output not at input {}, or output {} not "
                            "at its input.",
                            input_, routing.differential_output),
                true);
        }
    }

    // The interface alone, in the same band: its reference input while nothing plays, or as calibrated.
    std::optional<double> interface_floor_dbfs() const {
        if (setup_.calibration->loop_noise_dbfs)
            return *setup_.calibration->loop_noise_dbfs + 10.0 * std::log10((0.4 * rate_ - 300.0) / 19980.0);
        if (!setup_.routing.reference_input) return std::nullopt;
        const auto quiet =
            part(heard_.channel(*setup_.routing.reference_input), plan_.silence_begin, plan_.silence_end);
        if (all_zero(quiet)) return std::nullopt;
        return units::dbfs_from_sample_rms(band_rms(quiet, rate_) + 1e-12);
    }

    // What the source's thermal noise alone makes at the output of a unit of that gain.
    double least_unit_noise_dbfs() const {
        if (!expected_db_) return -300.0;
        const double volts =
            units::thermal_noise_volts(std::max(1.0, setup_.fixture.source_ohms),
                                       units::celsius_zero_k + setup_.temperature_c, 0.4 * rate_ - 300.0);
        return units::dbu_from_volts_rms(volts) + *expected_db_ - setup_.calibration->input_full_scale_dbu;
    }

    // ---- it is heard

    void find_rejection(std::span<const double> device) {
        if (!plan_.with_common_mode) return;
        const auto begin = plan_.tone_begin + latency_ + frames(0.03),
                   end = plan_.tone_end + latency_ - frames(0.02);
        if (end > device.size()) return;  // out of the ordinary, and of the take
        const auto samples = part(device, begin, end);
        common_mode_clips_ = clips(samples);
        const auto fit = spectrum::fit_sine(samples, rate_, tone_hz);
        const double heard = std::abs(fit.phasor) + 2.0 * fit.amplitude_std;  // what it is at most
        const double level_dbu =
            units::db_from_ratio(heard + 1e-15) + setup_.calibration->input_full_scale_dbu;
        report_.rejection_db = *report_.gain_db - (level_dbu - plan_.common_dbu);
        const auto& limit = setup_.fixture.rejection_limit_db;
        constexpr double beyond_belief_db = 15.0;
        if (limit && *report_.rejection_db > *limit + beyond_belief_db)
            add(WiringFault::common_mode_not_reaching,
                fmt::format("No common-mode signal arrives: a rejection of {:.0f} dB and more is beyond what "
                            "this fixture "
                            "can show ({:.0f} dB). Output {}, its plug or the feed.",
                            *report_.rejection_db, *limit, *setup_.routing.common_mode_output),
                false);
    }

    void judge_gain() {
        if (!expected_db_) return;
        const double off_db = *report_.gain_db - *expected_db_;
        const bool no_rejection =
            common_mode_clips_ || (report_.rejection_db && *report_.rejection_db < 20.0);
        constexpr double half_width_db = 0.8;
        if (std::abs(off_db + half_db) < half_width_db && no_rejection) {
            add(WiringFault::leg_open,
                fmt::format("One leg is open: the gain is {:.1f} dB low and common mode passes as well as "
                            "the signal. Look at "
                            "pins 2 and 3 of the input's plug and cable.",
                            -off_db),
                false);
            return;
        }
        constexpr double near_db = 1.5;
        if (std::abs(off_db) < near_db) return;
        for (const auto& other : profile_.settings)
            if (other.name != setting_ && other.nominal_gain_db &&
                std::abs(*report_.gain_db - *other.nominal_gain_db) < 0.8) {
                add(WiringFault::wrong_setting,
                    fmt::format("The gain is {:.1f} dB, that of setting '{}', not of '{}': the gain control "
                                "stands wrong.",
                                *report_.gain_db, other.name, setting_),
                    false);
                return;
            }
        for (double pad_db : {10.0, 20.0, 30.0, 40.0})
            if (std::abs(std::abs(off_db) - pad_db) < 0.8) {
                add(WiringFault::wrong_pad,
                    fmt::format("The gain is {:+.1f} dB off, as if a pad of {:.0f} dB were {}: another "
                                "fixture than the rig "
                                "file says, a pad switch on the unit, or its gain.",
                                off_db, pad_db, off_db < 0.0 ? "too much" : "missing"),
                    false);
                return;
            }
        add(WiringFault::gain_off,
            fmt::format("The gain is {:.1f} dB where {:.1f} dB are expected{}: the gain control, the pad, or "
                        "the unit.",
                        *report_.gain_db, *expected_db_,
                        std::abs(off_db + half_db) < half_width_db
                            ? " (6 dB low, as with one leg open, but without the common-mode feed that "
                              "cannot be told)"
                            : ""),
            false);
    }

    void judge_polarity() {
        if (report_.polarity >= 0) return;
        const auto upright = std::find_if(
            profile_.requirements.begin(), profile_.requirements.end(),
            [](const auto& one) { return one.quantity == "polarity" && one.min && *one.min > 0.0; });
        if (upright == profile_.requirements.end()) return;  // nobody says which way up it should be
        add(WiringFault::legs_swapped,
            "The signal comes out upside down: hot and cold are swapped in a cable or plug, at the input or "
            "at the output, or "
            "the unit's polarity switch is on.",
            false);
    }

    rig::Session& session_;
    const rig::Setup& setup_;
    const profile::DeviceProfile& profile_;
    const std::string& setting_;
    int input_;
    double rate_;
    std::optional<double> expected_db_;
    Plan plan_;
    std::vector<double> sent_;
    signal::Recording heard_;
    bool common_mode_clips_ = false;
    std::size_t latency_ = 0;
    WiringReport report_;
};

}  // namespace

const WiringFinding* WiringReport::finding(WiringFault fault) const {
    const auto found = std::find_if(findings.begin(), findings.end(),
                                    [&](const WiringFinding& one) { return one.fault == fault; });
    return found != findings.end() ? &*found : nullptr;
}

std::string wiring_fault_name(WiringFault fault) {
    static const char* const names[] = {"input_dead",
                                        "unit_silent",
                                        "feed_not_reaching",
                                        "wrong_socket",
                                        "too_loud",
                                        "leg_open",
                                        "legs_swapped",
                                        "wrong_setting",
                                        "wrong_pad",
                                        "gain_off",
                                        "common_mode_not_reaching"};
    return names[static_cast<std::size_t>(fault)];
}

WiringReport preflight(rig::Session& session, const profile::DeviceProfile& profile,
                       const std::string& setting, int device_input) {
    if (!session.setup().calibration)
        throw UsageError("the rig is not calibrated: run coldpin calibrate, or fill in [calibration]");
    return Preflight(session, profile, setting, device_input).report();
}

}  // namespace coldpin::check
