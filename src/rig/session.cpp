#include "coldpin/rig/session.h"

#include <algorithm>
#include <cmath>
#include <utility>

#include <fmt/core.h>

#include "coldpin/units/error.h"
#include "coldpin/units/level.h"

namespace coldpin::rig {

namespace {

constexpr double silence_before_s = 0.1;  // so that the beginning is never cut by a late start
constexpr double silence_after_s = 0.6;   // room for latency, and for an impulse response to die
constexpr int most_takes = 4;             // the first and three more
constexpr double converter_full_scale = 0.9999;

double combined(double a, double b) {
    return std::hypot(a, b);
}

// How far the stimulus' peak lies above that of a sine of its level: a multitone's limit is its peak.
double crest_excess_db(const signal::Stimulus& stimulus) {
    if (!std::holds_alternative<signal::Multitone>(stimulus.kind)) return 0.0;
    signal::Stimulus quiet = stimulus;
    quiet.level_dbfs = -60.0;
    double peak = 0.0;
    for (double x : signal::render(quiet)) peak = std::max(peak, std::abs(x));
    return units::db_from_ratio(peak) + 60.0;
}

std::vector<float> padded(const signal::Stimulus& stimulus, std::size_t before, std::size_t total) {
    std::vector<float> samples(total, 0.0F);
    const auto rendered = signal::render(stimulus);
    for (std::size_t n = 0; n < rendered.size(); ++n) samples[before + n] = static_cast<float>(rendered[n]);
    return samples;
}

std::vector<double> as_double(const std::vector<float>& samples, std::size_t from) {
    return {samples.begin() + static_cast<std::ptrdiff_t>(std::min(from, samples.size())), samples.end()};
}

}  // namespace

Session::Session(Setup setup, std::unique_ptr<Backend> backend, const std::atomic<bool>* stop)
    : setup_(std::move(setup)), backend_(std::move(backend)), stop_(stop) {}

double Session::converter_level_dbfs(Feed feed, double drive_dbu) const {
    if (!setup_.calibration)
        throw UsageError(fmt::format(
            "the rig '{}' is not calibrated, so volts are unknown: fill in [calibration] in its rig file",
            setup_.name));
    const auto& calibration = *setup_.calibration;
    const bool common = feed == Feed::common_mode;
    const double full_scale =
        common ? calibration.common_mode_output_full_scale_dbu.value_or(calibration.output_full_scale_dbu)
               : calibration.output_full_scale_dbu;
    const double loss = common ? setup_.fixture.common_mode_loss_db : setup_.fixture.differential_loss_db;
    return drive_dbu + loss - full_scale;
}

Wiring Session::wiring_for(Feed feed, const std::string& setting, const std::string& unit_channel) const {
    Wiring wiring{Plug::both, setting, unit_channel};
    if (setup_.routing.common_mode_output) return wiring;
    if (feed == Feed::idle)
        wiring.plug = wiring_ ? wiring_->plug : Plug::differential_pad;
    else
        wiring.plug = feed == Feed::common_mode ? Plug::common_mode_feed : Plug::differential_pad;
    return wiring;
}

bool Session::prepare(const Wiring& wiring) {
    if (wiring_ && *wiring_ == wiring) return true;
    if (!backend_->rewire(wiring)) return false;
    wiring_ = wiring;
    return true;
}

void Session::confirm(const Wiring& wiring) {
    wiring_ = wiring;
}

void Session::require_within_limits(const CaptureRequest& request) const {
    if (request.feed == Feed::idle) return;
    const bool common = request.feed == Feed::common_mode;
    const double highest_dbu = request.drive_dbu + crest_excess_db(request.stimulus);
    const auto& limits = setup_.limits;
    const auto& input_limit = common ? limits.max_preamp_common_mode_dbu : limits.max_preamp_input_dbu;
    if (input_limit && highest_dbu > *input_limit + 1e-9)
        throw UsageError(
            fmt::format("{}: {:.1f} dBu at the preamp's input is more than the rig allows ({:.1f} dBu, "
                        "[limits] in its rig file)",
                        request.label, highest_dbu, *input_limit));
    if (!common && limits.max_preamp_output_dbu && request.expected_gain_db &&
        highest_dbu + *request.expected_gain_db > *limits.max_preamp_output_dbu + 1e-9)
        throw UsageError(fmt::format(
            "{}: {:.1f} dBu at the preamp's output is more than the rig allows ({:.1f} dBu, [limits] in its "
            "rig file)",
            request.label, highest_dbu + *request.expected_gain_db, *limits.max_preamp_output_dbu));
    const double level_dbfs = converter_level_dbfs(request.feed, request.drive_dbu);
    if (level_dbfs + crest_excess_db(request.stimulus) > 1e-9)
        throw UsageError(
            fmt::format("{}: {:.1f} dBu at the preamp's input needs {:+.1f} dBFS from the converter: use a "
                        "pad that loses less, or a lower drive",
                        request.label, request.drive_dbu, level_dbfs + crest_excess_db(request.stimulus)));
}

signal::Description Session::description_for(const CaptureRequest& request,
                                             const signal::Stimulus& stimulus) const {
    signal::Description description;
    description.stimulus = stimulus;
    description.feed = feed_name(request.feed);
    description.setting = request.wiring.setting;
    description.unit_channel = request.wiring.unit_channel;
    description.device_channel = 1;
    if (setup_.routing.reference_input) description.reference_channel = 2;
    if (setup_.calibration) {
        description.input_full_scale_dbu = setup_.calibration->input_full_scale_dbu;
        description.input_uncertainty_db = setup_.calibration->input_uncertainty_db;
    }
    if (request.feed != Feed::idle) {
        const bool common = request.feed == Feed::common_mode;
        description.drive_dbu = request.drive_dbu;
        const double fixture = common ? setup_.fixture.common_mode_loss_uncertainty_db
                                      : setup_.fixture.differential_loss_uncertainty_db;
        description.drive_uncertainty_db =
            combined(setup_.calibration ? setup_.calibration->output_uncertainty_db : 0.0, fixture);
        if (common) description.rejection_limit_db = setup_.fixture.rejection_limit_db;
    }
    description.gain_db = request.gain_db;
    description.gain_uncertainty_db = request.gain_uncertainty_db;
    description.clock_ppm = clock_ppm_;
    description.source_ohms = setup_.fixture.source_ohms;
    description.temperature_c = setup_.temperature_c;
    return description;
}

Capture Session::capture(const CaptureRequest& request) {
    if (!wiring_ || !(*wiring_ == request.wiring))
        throw UsageError(fmt::format("{}: the wiring was not prepared", request.label));
    require_within_limits(request);
    signal::Stimulus stimulus = request.stimulus;
    stimulus.rate_hz = setup_.audio.sample_rate_hz;
    if (request.feed == Feed::idle)
        stimulus.kind = signal::Silence{};
    else
        stimulus.level_dbfs = converter_level_dbfs(request.feed, request.drive_dbu);

    const double rate = stimulus.rate_hz;
    const auto settle = static_cast<std::size_t>(std::llround(std::max(0.0, request.settle_s) * rate));
    const std::size_t before = settle + static_cast<std::size_t>(silence_before_s * rate);
    const std::size_t total =
        before + signal::frame_count(stimulus) + static_cast<std::size_t>(silence_after_s * rate);
    const auto& routing = setup_.routing;
    const int output = request.feed == Feed::common_mode && routing.common_mode_output
                           ? *routing.common_mode_output
                           : routing.differential_output;
    TakeRequest take_request;
    take_request.rate_hz = rate;
    take_request.feed = request.feed;
    take_request.label = request.label;
    take_request.input_channels = std::max(request.device_input, routing.reference_input.value_or(0));
    // Every output that the rig knows is played, silent where nothing is meant to sound.
    take_request.play.assign(static_cast<std::size_t>(std::max(routing.differential_output,
                                                               routing.common_mode_output.value_or(0))),
                             std::vector<float>(total, 0.0F));
    if (request.feed != Feed::idle)
        take_request.play[static_cast<std::size_t>(output) - 1] = padded(stimulus, before, total);

    Capture capture;
    capture.label = request.label;
    capture.description = description_for(request, stimulus);
    for (capture.takes = 1;; ++capture.takes) {
        const Take take = backend_->play_and_record(take_request, stop_);
        capture.recording = signal::Recording{};
        capture.recording.rate_hz = rate;
        const auto device = static_cast<std::size_t>(request.device_input) - 1;
        capture.recording.channels.push_back(as_double(take.recorded.at(device), settle));
        if (routing.reference_input)
            capture.recording.channels.push_back(
                as_double(take.recorded.at(static_cast<std::size_t>(*routing.reference_input) - 1), settle));
        for (const auto& flag : take.driver_flags)
            capture.description.remarks.push_back(fmt::format("take {}: driver: {}", capture.takes, flag));

        const auto& device_samples = capture.recording.channels.front();
        const auto at_end_stop = std::count_if(device_samples.begin(), device_samples.end(),
                                               [](double x) { return std::abs(x) >= converter_full_scale; });
        if (at_end_stop >= 2)
            throw InputClipped(
                fmt::format("{}: the interface's input clips ({} samples at full scale): turn its input gain "
                            "down, or the unit's; then calibrate again",
                            request.label, at_end_stop));

        std::vector<Glitch> glitches;
        bool proven = false;
        for (std::size_t c = 0; c < capture.recording.channels.size(); ++c) {
            const auto report = check_content(capture.recording.channels[c], rate, stimulus);
            proven = proven || report.proven;
            for (const auto& glitch : report.glitches)
                glitches.push_back(
                    {fmt::format("{}: {}", c == 0 ? "device input" : "reference input", glitch.what),
                     glitch.frame});
        }
        if (glitches.empty()) {
            if (!proven && request.feed != Feed::idle)
                capture.description.remarks.push_back(
                    "the stimulus is too faint in this recording to prove that no frame was lost");
            return capture;
        }
        const auto& first = glitches.front();
        const std::string reason =
            fmt::format("{} at {:.3f} s", first.what, static_cast<double>(first.frame) / rate);
        capture.description.remarks.push_back(
            fmt::format("take {} was damaged and thrown away: {}", capture.takes, reason));
        if (capture.takes == most_takes)
            throw CannotMeasure(
                fmt::format("{}: {} takes in a row were damaged; the last: {}.\nClose other programs, use a "
                            "larger buffer (frames_per_buffer), another USB port or cable.",
                            request.label, most_takes, reason));
    }
}

void Session::require_peak_within_limits(int output, double peak) const {
    // Nothing can be said in volts before a calibration, and nothing reaches a preamp that is not wired.
    const bool wired = wiring_ && (wiring_->plug == Plug::both || wiring_->plug == Plug::differential_pad ||
                                   wiring_->plug == Plug::common_mode_feed);
    if (!setup_.calibration || !wired || !(peak > 0.0)) return;
    const auto& routing = setup_.routing;
    const bool common = routing.common_mode_output ? output == *routing.common_mode_output
                                                   : wiring_->plug == Plug::common_mode_feed;
    if (!common && output != routing.differential_output) return;
    const auto& limit =
        common ? setup_.limits.max_preamp_common_mode_dbu : setup_.limits.max_preamp_input_dbu;
    const double level_dbu = units::db_from_ratio(peak) -
                             converter_level_dbfs(common ? Feed::common_mode : Feed::differential, 0.0);
    constexpr double rounding_db = 0.001;  // of float samples
    if (limit && level_dbu > *limit + rounding_db)
        throw UsageError(fmt::format(
            "{:.1f} dBu at the preamp's input is more than the rig allows ({:.1f} dBu, [limits] in "
            "its rig file): nothing was played",
            level_dbu, *limit));
}

signal::Recording Session::play_raw(int output, std::span<const double> samples, int inputs) {
    std::vector<std::vector<double>> outputs(static_cast<std::size_t>(output),
                                             std::vector<double>(samples.size(), 0.0));
    outputs.back().assign(samples.begin(), samples.end());
    return play_raw(outputs, inputs);
}

signal::Recording Session::play_raw(const std::vector<std::vector<double>>& outputs, int inputs) {
    if (!wiring_) throw UsageError("play: the wiring was not prepared");
    const auto& routing = setup_.routing;
    const std::size_t frames = outputs.at(0).size();
    TakeRequest request;
    request.rate_hz = setup_.audio.sample_rate_hz;
    request.label = "path";
    request.feed = Feed::differential;
    request.input_channels = inputs;
    const auto known = static_cast<std::size_t>(
        std::max(routing.differential_output, routing.common_mode_output.value_or(0)));
    request.play.assign(std::max(outputs.size(), known), std::vector<float>(frames, 0.0F));
    for (std::size_t c = 0; c < outputs.size(); ++c)
        for (std::size_t n = 0; n < frames; ++n) {
            if (!(std::abs(outputs[c].at(n)) <= 1.0))
                throw UsageError("play: a sample lies beyond full scale");
            request.play[c][n] = static_cast<float>(outputs[c][n]);
        }
    for (std::size_t c = 0; c < outputs.size(); ++c) {
        double peak = 0.0;
        for (double x : outputs[c]) peak = std::max(peak, std::abs(x));
        require_peak_within_limits(static_cast<int>(c) + 1, peak);
    }
    const Take take = backend_->play_and_record(request, stop_);
    signal::Recording recording;
    recording.rate_hz = request.rate_hz;
    for (const auto& one : take.recorded) recording.channels.push_back(as_double(one, 0));
    return recording;
}

void Session::play_tone_until(const std::atomic<bool>& stop, int output, double frequency_hz,
                              double level_dbfs) {
    const bool keeps_time = setup_.audio.backend == BackendKind::portaudio || setup_.simulated.real_time;
    constexpr double round_s = 30.0, glance_s = 0.2;
    signal::Stimulus tone;
    tone.kind = signal::Tone{frequency_hz};
    tone.length_s = keeps_time ? round_s : glance_s;
    tone.level_dbfs = level_dbfs;
    tone.rate_hz = setup_.audio.sample_rate_hz;
    const auto samples = signal::render(tone);
    require_peak_within_limits(output, units::sine_peak_from_dbfs(level_dbfs));
    TakeRequest request;
    request.rate_hz = tone.rate_hz;
    request.label = "tone";
    request.feed = Feed::differential;
    request.play.assign(static_cast<std::size_t>(std::max(output, setup_.routing.differential_output)),
                        std::vector<float>(samples.size(), 0.0F));
    request.play[static_cast<std::size_t>(output) - 1].assign(samples.begin(), samples.end());
    do {
        try {
            backend_->play_and_record(request, &stop);
        } catch (const CannotMeasure&) {
            if (!stop.load()) throw;
        }
    } while (keeps_time && !stop.load());
}

PathReport Session::check_path(double level_dbfs) {
    if (!wiring_) throw UsageError("path check: the wiring was not prepared");
    const auto& routing = setup_.routing;
    const bool loop = wiring_->plug == Plug::loop_differential || wiring_->plug == Plug::loop_common_mode;
    if (!loop && !routing.reference_input)
        throw UsageError("path check: the rig has no reference input, so only a loop can be checked");
    const int input = loop ? routing.device_inputs.front() : *routing.reference_input;
    const int output = wiring_->plug == Plug::loop_common_mode && routing.common_mode_output
                           ? *routing.common_mode_output
                           : routing.differential_output;
    const double rate = setup_.audio.sample_rate_hz;
    auto probe = render_path_probe(rate, level_dbfs);
    constexpr double before_s = 0.02, after_s = 0.15;
    probe.insert(probe.begin(), static_cast<std::size_t>(before_s * rate), 0.0);
    probe.resize(probe.size() + static_cast<std::size_t>(after_s * rate), 0.0);
    const auto heard = play_raw(output, probe, input);
    PathExpectation expectation;
    if (!loop && setup_.calibration && setup_.calibration->reference_full_scale_dbu)
        expectation.gain_db =
            setup_.calibration->output_full_scale_dbu - *setup_.calibration->reference_full_scale_dbu;
    return rig::check_path(heard.channel(input), rate, level_dbfs, expectation);
}

}  // namespace coldpin::rig
