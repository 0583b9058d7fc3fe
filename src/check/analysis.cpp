#include "coldpin/check/analysis.h"

#include <algorithm>

#include <fmt/format.h>

#include "coldpin/measure/cmrr.h"
#include "coldpin/measure/crosstalk.h"
#include "coldpin/measure/distortion.h"
#include "coldpin/measure/gain.h"
#include "coldpin/measure/hum.h"
#include "coldpin/measure/noise.h"
#include "coldpin/measure/response.h"
#include "coldpin/measure/timing.h"
#include "coldpin/profile/quantities.h"
#include "coldpin/spectrum/resample.h"
#include "coldpin/units/error.h"

namespace coldpin::check {

namespace {

using measure::Findings;
using measure::KnownLevel;

const DescribedRecording& need_main(const AnalysisInputs& inputs) {
    if (inputs.main == nullptr) throw UsageError("there is no recording to analyse");
    return *inputs.main;
}

std::span<const double> device_channel(const DescribedRecording& take, const AnalysisOptions& options) {
    return take.recording.channel(options.channel.value_or(take.description.device_channel.value_or(1)),
                                  take.name);
}

// The reference channel: as asked for, or as the description says when `by_description` and it is really
// there.
std::span<const double> reference_channel(const DescribedRecording& take, const AnalysisOptions& options,
                                          bool by_description) {
    if (options.reference_channel) return take.recording.channel(*options.reference_channel, take.name);
    const auto& described = take.description.reference_channel;
    if (by_description && described && static_cast<std::size_t>(*described) <= take.recording.channels.size())
        return take.recording.channel(*described, take.name);
    return {};
}

// With the generator muted the reference input hears the interface alone.
std::span<const double> interface_beside(const DescribedRecording& take, const AnalysisOptions& options) {
    return take.description.feed == "idle" && !options.channel ? reference_channel(take, options, true)
                                                               : std::span<const double>{};
}

measure::LevelScale scale_of(const DescribedRecording& take, const AnalysisOptions& options) {
    measure::LevelScale scale;
    scale.full_scale_dbu =
        options.input_full_scale_dbu ? options.input_full_scale_dbu : take.description.input_full_scale_dbu;
    if (!options.input_full_scale_dbu)
        scale.uncertainty_db = take.description.input_uncertainty_db.value_or(0.0);
    return scale;
}

std::optional<KnownLevel> gain_of(const DescribedRecording& take, const AnalysisOptions& options) {
    if (options.gain_db) return KnownLevel{*options.gain_db, 0.0};
    if (take.description.gain_db)
        return KnownLevel{*take.description.gain_db, take.description.gain_uncertainty_db.value_or(0.0)};
    return std::nullopt;
}

KnownLevel drive_of(const DescribedRecording& take, const std::optional<double>& said, const char* flag) {
    if (said) return {*said, 0.0};
    if (take.description.drive_dbu)
        return {*take.description.drive_dbu, take.description.drive_uncertainty_db.value_or(0.0)};
    throw UsageError(
        fmt::format("{}: the level at the preamp's input is unknown: say it with {}", take.name, flag));
}

void require_same_rate(const DescribedRecording& a, const DescribedRecording& b) {
    if (a.recording.rate_hz != b.recording.rate_hz)
        throw UsageError(fmt::format("{} is at {:g} Hz, {} at {:g} Hz: they must be the same", a.name,
                                     a.recording.rate_hz, b.name, b.recording.rate_hz));
}

// What was played, for a recording: the stimulus named beside it wins over its own description.
struct Played {
    std::optional<signal::Stimulus> stimulus;
    std::span<const double> samples;
};
Played played_for(const DescribedRecording& take, const AnalysisInputs& inputs) {
    if (inputs.stimulus != nullptr) {
        require_same_rate(take, *inputs.stimulus);
        return {inputs.stimulus->description.stimulus,
                inputs.stimulus->recording.channel(1, inputs.stimulus->name)};
    }
    if (take.description.stimulus && take.description.stimulus->rate_hz != take.recording.rate_hz)
        throw UsageError(fmt::format("{}: is at {:g} Hz, its description says {:g} Hz", take.name,
                                     take.recording.rate_hz, take.description.stimulus->rate_hz));
    return {take.description.stimulus, {}};
}

double tone_of(const DescribedRecording& take, const AnalysisOptions& options, double rate_hz) {
    std::vector<double> tones = options.frequencies_hz;
    if (tones.empty() && take.description.stimulus)
        tones = signal::tone_frequencies_hz(*take.description.stimulus);
    if (tones.empty())
        throw UsageError(
            fmt::format("{}: which tone was played is unknown: say it with --frequency", take.name));
    if (!(tones.front() > 0.0) || !(tones.front() < 0.5 * rate_hz))
        throw UsageError(
            fmt::format("--frequency {:g}: outside what {:g} Hz sampling carries", tones.front(), rate_hz));
    return tones.front();
}

Findings analyse_gain(const AnalysisInputs& inputs, const AnalysisOptions& options) {
    const auto& take = need_main(inputs);
    measure::GainQuestion question;
    question.recording = device_channel(take, options);
    question.reference = reference_channel(take, options, true);
    question.rate_hz = take.recording.rate_hz;
    question.scale = scale_of(take, options);
    if (!question.scale.full_scale_dbu)
        throw UsageError(
            fmt::format("{}: gain in dB needs volts: say what level a 0 dBFS sine is at the input "
                        "(--input-full-scale-dbu)",
                        take.name));
    question.drive_dbu = drive_of(take, options.drive_dbu, "--drive-dbu");
    question.frequency_hz = tone_of(take, options, question.rate_hz);
    return measure::gain(question);
}

Findings analyse_response(const AnalysisInputs& inputs, const AnalysisOptions& options) {
    const auto& take = need_main(inputs);
    const Played played = played_for(take, inputs);
    measure::ResponseQuestion question;
    question.recording = device_channel(take, options);
    question.rate_hz = take.recording.rate_hz;
    question.stimulus = played.stimulus;
    question.stimulus_samples = played.samples;
    question.reference = reference_channel(take, options, inputs.stimulus == nullptr);
    question.band = options.band.value_or(measure::Band{});
    question.reference_frequency_hz = options.reference_frequency_hz.value_or(997.0);
    return measure::response(question);
}

Findings analyse_timing(const std::string& kind, const AnalysisInputs& inputs,
                        const AnalysisOptions& options) {
    const auto& take = need_main(inputs);
    const Played played = played_for(take, inputs);
    measure::TimingQuestion question;
    question.recording = device_channel(take, options);
    question.rate_hz = take.recording.rate_hz;
    question.stimulus = played.stimulus;
    question.stimulus_samples = played.samples;
    // Latency is that of the whole path from what was played; polarity is that of the unit, so what was
    // really sent decides when it was recorded.
    question.reference = reference_channel(take, options, kind == "polarity" && inputs.stimulus == nullptr);
    return kind == "polarity" ? measure::polarity(question) : measure::latency(question);
}

Findings analyse_noise(const AnalysisInputs& inputs, const AnalysisOptions& options) {
    const auto& take = need_main(inputs);
    measure::NoiseQuestion question;
    question.recording = device_channel(take, options);
    question.rate_hz = take.recording.rate_hz;
    question.scale = scale_of(take, options);
    question.band = options.band.value_or(measure::Band{});
    question.gain_db = gain_of(take, options);
    question.source_ohms = options.source_ohms
                               ? options.source_ohms
                               : (question.gain_db ? take.description.source_ohms : std::nullopt);
    question.temperature_c = options.temperature_c.value_or(take.description.temperature_c.value_or(20.0));
    if (inputs.interface_idle != nullptr) {
        require_same_rate(take, *inputs.interface_idle);
        question.interface_idle = device_channel(*inputs.interface_idle, options);
    }
    question.interface_beside = interface_beside(take, options);
    return measure::noise(question);
}

Findings analyse_distortion(const AnalysisInputs& inputs, const AnalysisOptions& options) {
    const auto& take = need_main(inputs);
    measure::DistortionQuestion question;
    question.recording = device_channel(take, options);
    question.rate_hz = take.recording.rate_hz;
    question.scale = scale_of(take, options);
    question.band = options.band.value_or(measure::Band{});
    question.frequency_hz = tone_of(take, options, question.rate_hz);
    return measure::distortion(question);
}

Findings analyse_crosstalk(const AnalysisInputs& inputs, const AnalysisOptions& options) {
    const auto& take = need_main(inputs);
    if (!options.driven_channel)
        throw UsageError(
            "crosstalk needs the channel that was driven (--driven-channel M) beside the one that was not "
            "(--channel N)");
    measure::CrosstalkQuestion question;
    question.driven = take.recording.channel(*options.driven_channel, take.name);
    question.quiet = device_channel(take, options);
    if (*options.driven_channel == options.channel.value_or(take.description.device_channel.value_or(1)))
        throw UsageError(
            fmt::format("--channel and --driven-channel are both {}: name the one that was not driven with "
                        "--channel",
                        *options.driven_channel));
    question.rate_hz = take.recording.rate_hz;
    question.frequency_hz = tone_of(take, options, question.rate_hz);
    return measure::crosstalk(question);
}

Findings analyse_hum(const AnalysisInputs& inputs, const AnalysisOptions& options) {
    const auto& take = need_main(inputs);
    measure::HumQuestion question;
    question.recording = device_channel(take, options);
    question.rate_hz = take.recording.rate_hz;
    question.scale = scale_of(take, options);
    question.band = options.band.value_or(measure::Band{});
    question.mains_hz = options.mains_hz;
    question.gain_db = gain_of(take, options);
    question.interface_beside = interface_beside(take, options);
    return measure::hum(question);
}

Findings analyse_cmrr(const AnalysisInputs& inputs, const AnalysisOptions& options) {
    const auto& differential = need_main(inputs);
    if (inputs.common_mode == nullptr)
        throw UsageError(
            "common-mode rejection needs a recording with common-mode drive (--common-mode C.wav)");
    const auto& common = *inputs.common_mode;
    require_same_rate(differential, common);
    measure::CmrrQuestion question;
    question.differential = device_channel(differential, options);
    question.common_mode = device_channel(common, options);
    if (inputs.leakage != nullptr) {
        require_same_rate(common, *inputs.leakage);
        question.leakage = device_channel(*inputs.leakage, options);
    }
    question.rate_hz = differential.recording.rate_hz;
    question.differential_drive_dbu = drive_of(differential, options.drive_dbu, "--differential-drive-dbu");
    question.common_mode_drive_dbu =
        drive_of(common, options.common_mode_drive_dbu, "--common-mode-drive-dbu");
    question.frequencies_hz = options.frequencies_hz;
    question.differential_stimulus = played_for(differential, inputs).stimulus;
    question.common_mode_stimulus = played_for(common, inputs).stimulus;
    question.rejection_limit_db = common.description.rejection_limit_db;
    question.band = options.band.value_or(measure::Band{});
    return measure::common_mode_rejection(question);
}

// A take whose input ran from another clock, as it would have come by the output's.
std::optional<DescribedRecording> by_the_outputs_clock(const DescribedRecording* take) {
    if (take == nullptr || !take->description.clock_ppm || *take->description.clock_ppm == 0.0)
        return std::nullopt;
    // Flat over the whole band; no rate is lowered by more than a thousandth, so nothing folds.
    const spectrum::ResampleQuality quality{64, 12.0, 1.0};
    constexpr double ppm = 1e-6;
    DescribedRecording corrected = *take;
    const double rate = take->recording.rate_hz;
    for (auto& channel : corrected.recording.channels)
        channel =
            spectrum::resampled(channel, rate * (1.0 + ppm * *take->description.clock_ppm), rate, quality);
    return corrected;
}

Findings analyse_as_is(const std::string& kind, const AnalysisInputs& inputs,
                       const AnalysisOptions& options) {
    if (kind == "gain") return analyse_gain(inputs, options);
    if (kind == "response") return analyse_response(inputs, options);
    if (kind == "noise") return analyse_noise(inputs, options);
    if (kind == "hum") return analyse_hum(inputs, options);
    if (kind == "cmrr") return analyse_cmrr(inputs, options);
    if (kind == "distortion") return analyse_distortion(inputs, options);
    if (kind == "crosstalk") return analyse_crosstalk(inputs, options);
    if (kind == "polarity" || kind == "latency") return analyse_timing(kind, inputs, options);
    const auto& kinds = profile::analysis_kinds();
    const std::string near = profile::nearest_word(kind, {kinds.begin(), kinds.end()});
    throw UsageError(fmt::format("there is no analysis '{}': it is one of {}{}", kind, fmt::join(kinds, ", "),
                                 near.empty() ? "" : "; did you mean " + near + "?"));
}

}  // namespace

Findings analyse(const std::string& kind, const AnalysisInputs& inputs, const AnalysisOptions& options) {
    const auto main = by_the_outputs_clock(inputs.main),
               common_mode = by_the_outputs_clock(inputs.common_mode),
               leakage = by_the_outputs_clock(inputs.leakage);
    AnalysisInputs by_one_clock = inputs;
    if (main) by_one_clock.main = &*main;
    if (common_mode) by_one_clock.common_mode = &*common_mode;
    if (leakage) by_one_clock.leakage = &*leakage;
    return analyse_as_is(kind, by_one_clock, options);
}

}  // namespace coldpin::check
