#include "coldpin/check/calibrate.h"

#include <algorithm>
#include <cmath>

#include <fmt/core.h>

#include "coldpin/measure/clipping.h"
#include "coldpin/measure/crosstalk.h"
#include "coldpin/measure/distortion.h"
#include "coldpin/measure/noise.h"
#include "coldpin/measure/response.h"
#include "coldpin/measure/timing.h"
#include "coldpin/spectrum/sine_fit.h"
#include "coldpin/units/error.h"
#include "coldpin/units/level.h"

#include "reading_agreement.h"
#include "tone_player.h"

namespace coldpin::check {

namespace {

constexpr double meter_hz = 220.0;      // between the harmonics of 50 and 60 Hz
constexpr double loop_top_dbfs = -3.0;  // of the loop's tones, or what the input bears
constexpr double input_top_dbfs = -1.5;
constexpr double cautious_dbfs = -30.0;  // the first look, before anything is known
// The output feeds a pad at the meter and an input in the loop; the load changes its level by this at most:
// 100 ohm into 10 kohm, half of it either way.
constexpr double loading_db = 0.04;
constexpr double silent_dbfs = -80.0;
constexpr double separate_db = -40.0;  // two channels that leak more are not two channels

struct Level {
    double dbfs = -300.0;
    double std_db = 0.0;
};

// A tone's level in the middle of a recording of it.
Level level_of(std::span<const double> channel, double rate_hz, double frequency_hz) {
    const auto quarter = channel.size() / 4;
    const auto fit = spectrum::fit_sine(channel.subspan(quarter, 2 * quarter), rate_hz, frequency_hz);
    const double peak = std::abs(fit.phasor);
    if (!(peak > 1e-10)) return {};
    return {units::db_from_ratio(peak), units::db_per_relative_amplitude * fit.amplitude_std / peak};
}

std::vector<double> tone(double frequency_hz, double level_dbfs, double length_s, double rate_hz) {
    signal::Stimulus stimulus;
    stimulus.kind = signal::Tone{frequency_hz};
    stimulus.level_dbfs = level_dbfs;
    stimulus.length_s = length_s;
    stimulus.rate_hz = rate_hz;
    auto samples = signal::render(stimulus);
    samples.resize(samples.size() + static_cast<std::size_t>(0.1 * rate_hz), 0.0);
    return samples;
}

// The steps, each leaving its part of the result.
class Calibrator {
  public:
    Calibrator(rig::Session& session, Bench& bench, const CalibrateOptions& options)
        : session_(session), bench_(bench), options_(options), rate_(session.setup().audio.sample_rate_hz) {
        result_.findings.kind = "calibration";
        const auto& routing = session.setup().routing;
        inputs_ = std::max(*std::max_element(routing.device_inputs.begin(), routing.device_inputs.end()),
                           routing.reference_input.value_or(1));
    }

    CalibrationResult run() {
        read_meter();
        look_at_loop();
        measure_loop();
        measure_common_mode_output();
        if (!options_.accept_reading)
            require_agreement(result_.calibration, session_.setup().calibration, reading_.volts_rms);
        note_knobs();
        list_figures();
        return result_;
    }

  private:
    const rig::Routing& routing() const { return session_.setup().routing; }
    int device_input() const { return routing().device_inputs.front(); }

    void wire(rig::Plug plug, const std::string& instruction) {
        const rig::Wiring wiring{plug, "", ""};
        if (session_.prepare(wiring)) return;
        bench_.ask(instruction);
        session_.confirm(wiring);
    }

    // ---- the meter

    std::string asked_reading(double level_dbfs, const std::string& question) {
        TonePlayer player(session_, routing().differential_output, meter_hz, level_dbfs);
        std::string text = bench_.answer(question);
        player.finish();
        return text;
    }

    void read_meter() {
        const rig::Plug plug = routing().common_mode_output ? rig::Plug::both : rig::Plug::differential_pad;
        wire(plug,
             fmt::format(
                 "Phantom power off, monitors and headphones off. Leave the pad on output {}, unplug the "
                 "preamp from the pad, and set every knob where it will stay.",
                 routing().differential_output));
        level_dbfs_ = std::floor(10.0 * highest_level_for_meter(options_.level_dbfs)) / 10.0;
        bench_.progress("meter", 0, steps);
        if (options_.reading) {
            reading_ = rig::parse_meter_reading(*options_.reading);
        } else {
            const std::string question = fmt::format(
                "A tone of 220 Hz plays at {:.1f} dBFS on output {}. Meter on AC volts, across pins 2 and 3 "
                "of the "
                "output, in front of the pad, never behind it.\n  What does it show (1.228 V, 1228 mV, +4 "
                "dBu)?",
                level_dbfs_, routing().differential_output);
            reading_ = rig::parse_meter_reading(asked_reading(level_dbfs_, question));
            better_range();
        }
        result_.calibration.output_full_scale_dbu =
            units::dbu_from_volts_rms(reading_.volts_rms) - level_dbfs_;
    }

    // Never more than the rig allows at the preamp, should it still be connected: by the calibration before,
    // and by the reading once there is one.
    double highest_level_for_meter(double wanted_dbfs) const {
        const auto& limit_dbu = session_.setup().limits.max_preamp_input_dbu;
        double level = wanted_dbfs;
        if (limit_dbu && session_.setup().calibration)
            level = std::min(level, session_.converter_level_dbfs(rig::Feed::differential, *limit_dbu));
        if (limit_dbu && reading_.volts_rms > 0.0)
            level = std::min(level, *limit_dbu + session_.setup().fixture.differential_loss_db + level_dbfs_ -
                                        units::dbu_from_volts_rms(reading_.volts_rms));
        return level;
    }

    void better_range() {
        const double headroom_db = std::max(0.0, highest_level_for_meter(-0.5) - level_dbfs_);
        const auto advice = rig::advise_range(reading_, options_.accuracy, headroom_db);
        if (!advice) return;
        // What is said is what is played: a tenth of a decibel.
        const double level = std::floor(10.0 * (level_dbfs_ + advice->level_change_db)) / 10.0;
        const std::string text =
            asked_reading(level, fmt::format("{}{}\n  Type the new reading, or press Enter to keep {:.4g} V.",
                                             advice->sentence,
                                             advice->level_change_db != 0.0
                                                 ? fmt::format(" The tone now plays at {:.1f} dBFS.", level)
                                                 : "",
                                             reading_.volts_rms));
        if (text.find_first_not_of(" \t\r\n") == std::string::npos) return;
        reading_ = rig::parse_meter_reading(text);
        level_dbfs_ = level;
    }

    // ---- the loop

    void look_at_loop() {
        bench_.progress("loop", 1, steps);
        wire(rig::Plug::loop_differential, fmt::format("Take the cable out of the pad and plug output {} "
                                                       "straight into input {}. The preamp stays out.",
                                                       routing().differential_output, device_input()));
        // First quietly: an input that is set for microphones would clip.
        const double quiet = -20.0;
        auto first =
            session_.play_raw(routing().differential_output, tone(997.0, cautious_dbfs, 0.3, rate_), inputs_);
        const double heard = level_of(first.channel(device_input()), rate_, 997.0).dbfs;
        find_channels(first, heard);
        const double gain = heard - cautious_dbfs;
        loop_level_dbfs_ = std::clamp(input_top_dbfs - gain, quiet - 40.0, loop_top_dbfs);
        if (loop_level_dbfs_ < -40.0)
            throw CannotMeasure(
                fmt::format("input {} is far too sensitive for output {}: {:+.1f} dB from one to the other. "
                            "Turn the input down, "
                            "use its line socket, and begin again.",
                            device_input(), routing().differential_output, gain));
        result_.path = session_.check_path(loop_level_dbfs_);
        for (const auto& finding : result_.path.findings) {
            if (finding.spoils && finding.fault != rig::PathFault::inverted)
                throw CannotMeasure(finding.sentence +
                                    "\nNothing was calibrated; the calibration before stays valid.");
            result_.findings.cautions.push_back(finding.sentence);
        }
    }

    void find_channels(const signal::Recording& first, double heard_dbfs) {
        if (heard_dbfs > silent_dbfs) return;
        for (int input = 1; input <= inputs_; ++input)
            if (input != device_input() && input != routing().reference_input &&
                level_of(first.channel(input), rate_, 997.0).dbfs > silent_dbfs)
                throw CannotMeasure(fmt::format(
                    "the tone arrives at input {} instead of input {}: swapped plugs, or swapped channels in "
                    "the operating system. Put it right, or name input {} in the rig file.",
                    input, device_input(), input));
        if (routing().common_mode_output) {
            const auto other = session_.play_raw(*routing().common_mode_output,
                                                 tone(997.0, cautious_dbfs, 0.3, rate_), inputs_);
            if (level_of(other.channel(device_input()), rate_, 997.0).dbfs > silent_dbfs)
                throw CannotMeasure(fmt::format(
                    "input {} hears output {} instead of output {}: swapped plugs, or swapped channels in "
                    "the "
                    "operating system.",
                    device_input(), *routing().common_mode_output, routing().differential_output));
        }
        throw CannotMeasure(fmt::format(
            "input {} hears nothing of output {}: a plug, a muted or dead channel, a knob at zero, or the "
            "wrong numbers in the rig file.",
            device_input(), routing().differential_output));
    }

    void measure_loop() {
        bench_.progress("loop: level, noise", 2, steps);
        auto& calibration = result_.calibration;
        const auto heard = session_.play_raw(routing().differential_output,
                                             tone(meter_hz, loop_level_dbfs_, 0.8, rate_), inputs_);
        const Level device = level_of(heard.channel(device_input()), rate_, meter_hz);
        calibration.input_full_scale_dbu = calibration.output_full_scale_dbu + loop_level_dbfs_ - device.dbfs;
        statistics_db_ = 2.0 * device.std_db;
        measure_reference(heard);
        measure_crosstalk(heard, device.dbfs);
        measure_silence();
        calibration.loop_latency_frames = result_.path.latency_frames
                                              ? std::optional(*result_.path.latency_frames - 0.02 * rate_)
                                              : std::nullopt;
        measure_distortion();
        calibration.loop_deviation_db = result_.path.deviation_db;
        if (options_.whole_response) measure_response();
        const double distortion = units::ratio_from_db(calibration.loop_distortion_db.value_or(-100.0));
        calibration.output_uncertainty_db =
            rig::meter_uncertainty_db(reading_, options_.accuracy, distortion);
        calibration.input_uncertainty_db =
            std::hypot(std::hypot(calibration.output_uncertainty_db, loading_db), statistics_db_);
    }

    // A figure of a measurement as one of this calibration.
    void keep(measure::Figure figure, const char* quantity) {
        figure.quantity = quantity;
        result_.findings.figures.push_back(std::move(figure));
    }

    void measure_distortion() {
        constexpr double tone_hz = 997.0;
        const auto heard = session_.play_raw(routing().differential_output,
                                             tone(tone_hz, loop_level_dbfs_, 0.8, rate_), inputs_);
        measure::DistortionQuestion question;
        question.recording = heard.channel(device_input());
        question.rate_hz = rate_;
        question.frequency_hz = tone_hz;
        question.band.high_hz = std::min(20000.0, 0.45 * rate_);
        question.highest_harmonic = 5;
        const auto findings = measure::distortion(question);
        if (const auto* thd = findings.figure("thd")) {
            result_.calibration.loop_distortion_db = units::db_from_ratio(0.01 * thd->value + 1e-12);
            keep(*thd, "loop_distortion");
        }
    }

    void measure_reference(const signal::Recording& heard) {
        if (!routing().reference_input) return;
        const Level reference = level_of(heard.channel(*routing().reference_input), rate_, meter_hz);
        if (reference.dbfs < silent_dbfs) {
            result_.findings.cautions.push_back(
                fmt::format("The reference input {} hears nothing of output {}: its tap is not connected, so "
                            "knobs that move and lost "
                            "frames will go unseen.",
                            *routing().reference_input, routing().differential_output));
            return;
        }
        const auto channel = heard.channel(*routing().reference_input);
        if (measure::find_clipping(channel).samples_at_full_scale > 0) {
            result_.findings.cautions.push_back(
                fmt::format("The reference input {} clips at {:.1f} dBFS of the output: turn it down and "
                            "calibrate again. "
                            "Until then it is not used.",
                            *routing().reference_input, loop_level_dbfs_));
            return;
        }
        result_.calibration.reference_full_scale_dbu =
            result_.calibration.output_full_scale_dbu + loop_level_dbfs_ - reference.dbfs;
    }

    // Other inputs, and the other output, must hear and say nothing.
    void measure_crosstalk(const signal::Recording& heard, double device_dbfs) {
        std::optional<measure::Figure> worst;
        const auto consider = [&](const measure::Figure& figure) {
            if (!worst || figure.value > worst->value) worst = figure;
        };
        for (int input = 1; input <= inputs_; ++input) {
            if (input == device_input() || input == routing().reference_input) continue;
            const auto findings = measure::crosstalk(
                {heard.channel(device_input()), heard.channel(input), rate_, meter_hz, {}});
            if (const auto* figure = findings.figure("crosstalk")) consider(*figure);
        }
        if (routing().common_mode_output) {
            const auto other = session_.play_raw(*routing().common_mode_output,
                                                 tone(meter_hz, loop_level_dbfs_, 0.4, rate_), inputs_);
            const Level level = level_of(other.channel(device_input()), rate_, meter_hz);
            consider({"crosstalk", level.dbfs - device_dbfs, "dB", 2.0 * level.std_db, 2.0,
                      measure::Bound::exact, measure::Conditions{{"frequency_hz", meter_hz}}});
        }
        if (!worst) return;
        result_.calibration.loop_crosstalk_db = worst->value;
        keep(*worst, "loop_crosstalk");
        if (worst->value > separate_db)
            throw CannotMeasure(fmt::format(
                "channels are not separate: {:.1f} dB from one to another. They are summed to mono, mixed, "
                "or a plug "
                "joins them. Switch mono and mixing off in the operating system and the interface's mixer.",
                worst->value));
    }

    void measure_silence() {
        const std::vector<double> nothing(static_cast<std::size_t>(1.5 * rate_), 0.0);
        const auto idle = session_.play_raw(routing().differential_output, nothing, inputs_);
        const auto channel = idle.channel(device_input());
        double mean = 0.0;
        for (double x : channel) mean += x / static_cast<double>(channel.size());
        result_.calibration.loop_dc = mean;
        measure::NoiseQuestion question;
        question.recording = channel.subspan(channel.size() / 5);
        question.rate_hz = rate_;
        question.band.high_hz = std::min(20000.0, 0.45 * rate_);
        const auto findings = measure::noise(question);
        if (const auto* noise = findings.figure("noise_output")) {
            result_.calibration.loop_noise_dbfs = noise->value;
            keep(*noise, "loop_noise");
        }
    }

    void measure_response() {
        bench_.progress("loop: response", 3, steps);
        signal::Stimulus sweep;
        sweep.kind = signal::Sweep{10.0, 0.47 * rate_};
        sweep.length_s = 3.0;
        sweep.level_dbfs = loop_level_dbfs_ - 3.0;
        sweep.rate_hz = rate_;
        auto samples = signal::render(sweep);
        samples.resize(samples.size() + static_cast<std::size_t>(0.6 * rate_), 0.0);
        const auto heard = session_.play_raw(routing().differential_output, samples, inputs_);
        measure::ResponseQuestion question;
        question.recording = heard.channel(device_input());
        question.rate_hz = rate_;
        question.stimulus = sweep;
        question.band.high_hz = std::min(20000.0, 0.45 * rate_);
        auto findings = measure::response(question);
        if (const auto* deviation = findings.figure("response_deviation")) {
            result_.calibration.loop_deviation_db = std::abs(deviation->value);
            keep(*deviation, "loop_deviation");
        }
        measure::TimingQuestion timing;
        timing.recording = question.recording;
        timing.rate_hz = rate_;
        timing.stimulus = sweep;
        if (const auto latency = measure::latency(timing); !latency.figures.empty()) {
            result_.calibration.loop_latency_frames = latency.figures.front().value;
            keep(latency.figures.front(), "loop_latency");
        }
        result_.findings.curves = std::move(findings.curves);
    }

    void measure_common_mode_output() {
        if (!routing().common_mode_output) return;
        bench_.progress("common-mode output", 4, steps);
        wire(rig::Plug::loop_common_mode, fmt::format("Move the loop: output {} straight into input {}.",
                                                      *routing().common_mode_output, device_input()));
        const auto heard = session_.play_raw(*routing().common_mode_output,
                                             tone(meter_hz, loop_level_dbfs_, 0.8, rate_), inputs_);
        const Level level = level_of(heard.channel(device_input()), rate_, meter_hz);
        if (level.dbfs < silent_dbfs)
            throw CannotMeasure(
                fmt::format("input {} hears nothing of output {}: a plug, a muted or dead channel, or the "
                            "wrong number in the rig file.",
                            device_input(), *routing().common_mode_output));
        result_.calibration.common_mode_output_full_scale_dbu =
            result_.calibration.input_full_scale_dbu + level.dbfs - loop_level_dbfs_;
    }

    void note_knobs() {
        auto& calibration = result_.calibration;
        calibration.time_utc = options_.time_utc;
        calibration.meter = options_.meter;
        if (options_.knobs)
            calibration.knobs = *options_.knobs;
        else if (session_.setup().audio.backend == rig::BackendKind::portaudio)
            calibration.knobs = bench_.answer(
                "Where do the knobs and switches of the interface stand? They have no memory (Enter to leave "
                "it out).");
        bench_.progress("done", steps, steps);
    }

    void list_figures() {
        const auto& calibration = result_.calibration;
        const auto add = [&](const char* quantity, const std::optional<double>& value, const char* unit,
                             double uncertainty, measure::Conditions conditions = {}) {
            if (value)
                result_.findings.figures.push_back(
                    {quantity, *value, unit, uncertainty, 2.0, measure::Bound::exact, std::move(conditions)});
        };
        const double both_db = std::hypot(calibration.input_uncertainty_db, loading_db);
        add("output_full_scale", calibration.output_full_scale_dbu, "dBu", calibration.output_uncertainty_db);
        add("common_mode_output_full_scale", calibration.common_mode_output_full_scale_dbu, "dBu", both_db);
        add("input_full_scale", calibration.input_full_scale_dbu, "dBu", calibration.input_uncertainty_db);
        add("reference_full_scale", calibration.reference_full_scale_dbu, "dBu",
            calibration.input_uncertainty_db);
        add("loop_polarity", static_cast<double>(result_.path.polarity), "", 0.0);
        if (calibration.loop_dc) add("loop_offset", 1e6 * *calibration.loop_dc, "ppm", 1.0);
        if (result_.path.clock_ppm)
            add("loop_clock", *result_.path.clock_ppm, "ppm", 2.0 * result_.path.clock_std_ppm.value_or(0.0));
    }

    static constexpr std::size_t steps = 5;
    rig::Session& session_;
    Bench& bench_;
    const CalibrateOptions& options_;
    double rate_;
    int inputs_ = 1;
    double level_dbfs_ = 0.0, loop_level_dbfs_ = 0.0, statistics_db_ = 0.0;
    rig::MeterReading reading_;
    CalibrationResult result_;
};

}  // namespace

CalibrationResult calibrate(rig::Session& session, Bench& bench, const CalibrateOptions& options) {
    if (!(options.level_dbfs <= 0.0) || options.level_dbfs < -60.0)
        throw UsageError(
            fmt::format("a tone of {:g} dBFS for the meter: expected -60 to 0", options.level_dbfs));
    return Calibrator(session, bench, options).run();
}

}  // namespace coldpin::check
