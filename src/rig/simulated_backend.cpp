// A whole bench in memory: interface, fixture and preamp, seeded.
#include <algorithm>
#include <chrono>
#include <cmath>
#include <numbers>
#include <optional>
#include <thread>

#include <fmt/core.h>

#include "coldpin/spectrum/fft.h"
#include "coldpin/units/error.h"
#include "coldpin/units/level.h"

#include "backends.h"
#include "gaussian.h"
#include "simulated_host.h"
#include "simulated_path.h"

namespace coldpin::rig {

namespace {

constexpr double two_pi = 2.0 * std::numbers::pi;
constexpr double noise_band_hz = 19980.0;  // the band that the interface's noise levels are stated for
constexpr std::size_t frames_repeated = 32, frames_zeroed = 40;

double volts_at_full_scale(double full_scale_dbu) {
    return units::volts_rms_from_dbu(full_scale_dbu) / units::sample_rms_at_0_dbfs;
}

class SimulatedBackend : public Backend {
  public:
    explicit SimulatedBackend(const Setup& setup)
        : setup_(setup), preamp_(setup.simulated.preamp.value_or(SimulatedPreamp{})) {
        if (preamp_.gain_db_by_setting.empty()) throw UsageError("the simulated preamp has no gain setting");
        state_.gain_db = preamp_.gain_db_by_setting.begin()->second;
    }

    Take play_and_record(const TakeRequest& request, const std::atomic<bool>* stop) override;
    bool rewire(const Wiring& wiring) override;
    std::string description() const override {
        return fmt::format("simulated interface, {:g} kHz", setup_.audio.sample_rate_hz / 1000.0);
    }

  private:
    std::vector<double> out_volts(const std::vector<std::vector<float>>& play, int output, double rate_hz,
                                  Gaussian& noise) const;
    std::vector<std::vector<float>> recorded(const TakeRequest& request,
                                             const std::vector<std::vector<float>>& play) const;
    double reference_full_scale_dbu() const;
    std::vector<float> through_input(std::vector<double> volts, double full_scale_dbu,
                                     const std::vector<double>& leakage_v, double rate_hz,
                                     Gaussian& noise) const;
    void damage(std::vector<std::vector<float>>& recorded) const;
    void pace(std::size_t frames, double rate_hz, const std::atomic<bool>* stop) const;

    Setup setup_;
    SimulatedPreamp preamp_;
    PathState state_;
    Plug plug_ = Plug::both;
    std::optional<std::string> first_channel_;
    int takes_ = 0;
};

bool SimulatedBackend::rewire(const Wiring& wiring) {
    const auto& gains = preamp_.gain_db_by_setting;
    auto found = gains.find(wiring.setting);
    // A unit with one gain does not mind what its setting is called.
    if (found == gains.end() && gains.size() == 1 && (wiring.setting.empty() || gains.begin()->first.empty()))
        found = gains.begin();
    if (found == gains.end() && wiring.setting.empty()) found = gains.begin();
    if (found == gains.end()) {
        std::string known;
        for (const auto& gain : gains) known += (known.empty() ? "'" : ", '") + gain.first + "'";
        throw UsageError(
            fmt::format("the simulated preamp has no gain setting '{}'; it has {}", wiring.setting, known));
    }
    state_.gain_db = found->second;
    if (!first_channel_) first_channel_ = wiring.unit_channel;
    state_.second_channel = wiring.unit_channel != *first_channel_;
    plug_ = wiring.plug;
    return true;
}

std::vector<double> SimulatedBackend::out_volts(const std::vector<std::vector<float>>& play, int output,
                                                double rate_hz, Gaussian& noise) const {
    const auto& interface = setup_.simulated.interface;
    const double volts =
        volts_at_full_scale(interface.output_full_scale_dbu + setup_.simulated.faults.output_moved_db);
    const double noise_rms =
        units::sample_rms_from_dbfs(interface.output_noise_dbfs) * std::sqrt(0.5 * rate_hz / noise_band_hz);
    // Half of the loop's distortion arises here, half at the input.
    const double second = units::ratio_from_db(interface.second_harmonic_db),
                 third = 2.0 * units::ratio_from_db(interface.third_harmonic_db);
    std::vector<double> out(play.front().size());
    const auto index = static_cast<std::size_t>(output) - 1;
    for (std::size_t n = 0; n < out.size(); ++n) {
        const double x = index < play.size() ? static_cast<double>(play[index][n]) : 0.0;
        out[n] = volts * (x + second * x * x + third * x * x * x + noise_rms * noise());
    }
    return out;
}

std::vector<float> SimulatedBackend::through_input(std::vector<double> volts, double full_scale_dbu,
                                                   const std::vector<double>& leakage_v, double rate_hz,
                                                   Gaussian& noise) const {
    const auto& interface = setup_.simulated.interface;
    const double leak = units::ratio_from_db(interface.leakage_db),
                 per_volt = 1.0 / volts_at_full_scale(full_scale_dbu);
    const std::size_t frames = volts.size();
    for (std::size_t n = 0; n < frames; ++n) volts[n] = (volts[n] + leak * leakage_v[n]) * per_volt;
    const std::size_t size = spectrum::fast_fft_size(frames + static_cast<std::size_t>(rate_hz));
    auto bins = spectrum::forward_fft(volts, size);
    for (std::size_t k = 0; k < bins.size(); ++k) {
        const double f = static_cast<double>(k) * rate_hz / static_cast<double>(size);
        const std::complex<double> coupling =
            std::complex<double>(0.0, f) / std::complex<double>(interface.ac_corner_hz, f);
        bins[k] *=
            coupling * std::polar(1.0, -two_pi * std::fmod(f / rate_hz * interface.latency_frames, 1.0));
    }
    auto samples = spectrum::inverse_fft(bins, size);
    samples.resize(frames);
    if (plug_ != Plug::input_terminated)
        add_hum(samples, units::sample_rms_from_dbfs(interface.ground_loop_hum_dbfs), -6.0, interface,
                state_.start_s, rate_hz);
    add_hum(samples, units::sample_rms_from_dbfs(interface.own_hum_dbfs), -6.0, interface, state_.start_s,
            rate_hz);
    const double noise_rms =
        units::sample_rms_from_dbfs(interface.input_noise_dbfs) * std::sqrt(0.5 * rate_hz / noise_band_hz);
    const double second = units::ratio_from_db(interface.second_harmonic_db),
                 third = 2.0 * units::ratio_from_db(interface.third_harmonic_db);
    std::vector<float> recorded(frames);
    for (std::size_t n = 0; n < frames; ++n) {
        const double x = std::clamp(samples[n], -1.0, 1.0);
        recorded[n] = static_cast<float>(
            std::clamp(x + second * x * x + third * x * x * x + noise_rms * noise(), -1.0, 1.0));
    }
    return recorded;
}

void SimulatedBackend::damage(std::vector<std::vector<float>>& recorded) const {
    const auto& faults = setup_.simulated.faults;
    const auto hit = [&](const std::vector<int>& takes) {
        return std::find(takes.begin(), takes.end(), takes_) != takes.end();
    };
    const auto lost = static_cast<std::size_t>(faults.lost_frames);
    for (auto& channel : recorded) {
        const std::size_t middle = channel.size() / 2;
        const auto at = channel.begin() + static_cast<std::ptrdiff_t>(middle);
        if (faults.unplugged) std::fill(channel.begin(), channel.end(), 0.0F);
        if (hit(faults.lose_frames_in_takes) && middle + lost < channel.size()) {
            channel.erase(at, at + static_cast<std::ptrdiff_t>(lost));
            channel.insert(channel.end(), lost, channel.back());
            std::copy(channel.begin(), channel.begin() + static_cast<std::ptrdiff_t>(lost),
                      channel.end() - static_cast<std::ptrdiff_t>(lost));  // what came next
        } else if (hit(faults.repeat_frames_in_takes) && middle > frames_repeated) {
            const std::vector<float> block(at - frames_repeated, at);
            channel.insert(at, block.begin(), block.end());
            channel.resize(channel.size() - frames_repeated);
        } else if (hit(faults.zero_frames_in_takes) && middle + frames_zeroed < channel.size()) {
            std::fill(at, at + frames_zeroed, 0.0F);
        }
    }
}

void SimulatedBackend::pace(std::size_t frames, double rate_hz, const std::atomic<bool>* stop) const {
    if (!setup_.simulated.real_time) return;
    using clock = std::chrono::steady_clock;
    const auto until =
        clock::now() + std::chrono::duration_cast<clock::duration>(
                           std::chrono::duration<double>(static_cast<double>(frames) / rate_hz));
    while (clock::now() < until && (stop == nullptr || !stop->load()))
        std::this_thread::sleep_for(std::chrono::milliseconds(10));
}

Take SimulatedBackend::play_and_record(const TakeRequest& request, const std::atomic<bool>* stop) {
    if (request.play.empty() || request.play.front().empty()) throw UsageError("there is nothing to play");
    ++takes_;
    const std::size_t frames = request.play.front().size();
    pace(frames, request.rate_hz, stop);
    if (stop != nullptr && stop->load())
        throw CannotMeasure("interrupted: the outputs are silent, nothing of this take was kept");
    const auto& faults = setup_.simulated.faults;
    auto play = request.play;
    spoil_outputs(play, faults);
    Take take;
    take.recorded = recorded(request, play);
    if (faults.monitor_mix != 0.0) {
        // The mixer adds the device's input to every output; once round the loop is heard, twice is far
        // below.
        const auto heard = take.recorded[static_cast<std::size_t>(setup_.routing.device_inputs.front()) - 1];
        const auto delay = static_cast<std::size_t>(faults.monitor_delay_frames);
        for (auto& channel : play)
            for (std::size_t n = delay; n < frames; ++n)
                channel[n] += static_cast<float>(faults.monitor_mix) * heard[n - delay];
        take.recorded = recorded(request, play);
    }
    state_.start_s +=
        static_cast<double>(frames) / request.rate_hz + 1.7;  // as if a moment passed between takes
    spoil_inputs(take.recorded, faults);
    damage(take.recorded);
    return take;
}

// Which volts each input hears, and what its converter makes of them.
std::vector<std::vector<float>> SimulatedBackend::recorded(
    const TakeRequest& request, const std::vector<std::vector<float>>& play) const {
    Gaussian noise(setup_.simulated.seed * 1000003ULL + static_cast<unsigned long>(takes_));
    const std::size_t frames = request.play.front().size();
    const auto& routing = setup_.routing;
    const auto& faults = setup_.simulated.faults;
    const auto pad_v = out_volts(play, routing.differential_output, request.rate_hz, noise);
    const auto feed_v = routing.common_mode_output
                            ? out_volts(play, *routing.common_mode_output, request.rate_hz, noise)
                            : pad_v;
    // With one output its plug sits in one of the places; the others hear nothing.
    const bool loop = plug_ == Plug::loop_differential || plug_ == Plug::loop_common_mode;
    const bool apart = plug_ == Plug::input_terminated || plug_ == Plug::unit_off ||
                       plug_ == Plug::unit_terminated;  // no fixture at the preamp
    const bool pad_fed = !loop && !apart && (routing.common_mode_output || plug_ != Plug::common_mode_feed);
    const bool common_fed =
        !loop && !apart && (routing.common_mode_output || plug_ == Plug::common_mode_feed);
    const double pad = pad_fed && !faults.feed_not_reaching
                           ? units::ratio_from_db(-setup_.fixture.differential_loss_db - faults.pad_error_db)
                           : 0.0;
    const double feed = common_fed && !faults.feed_not_reaching && !faults.common_mode_dead
                            ? units::ratio_from_db(-setup_.fixture.common_mode_loss_db)
                            : 0.0;
    const std::vector<double> nothing(frames, 0.0);
    std::vector<double> differential_v(frames), common_v(frames), driven_v(frames);
    for (std::size_t n = 0; n < frames; ++n) {
        differential_v[n] = pad * pad_v[n];
        common_v[n] = feed * feed_v[n];
        driven_v[n] = routing.common_mode_output ? pad_v[n] + feed_v[n] : pad_v[n];
    }
    std::vector<double> out_v = nothing;
    if (plug_ == Plug::loop_differential) {
        out_v = pad_v;
        if (faults.legs_swapped)
            for (double& v : out_v) v = -v;
    } else if (plug_ == Plug::loop_common_mode) {
        out_v = feed_v;
    } else if (plug_ != Plug::input_terminated && plug_ != Plug::unit_off && !faults.unit_off &&
               !faults.output_not_connected) {
        if (!apart)
            add_hum(differential_v, units::volts_rms_from_dbu(faults.fixture_hum_dbu), -6.0,
                    setup_.simulated.interface, state_.start_s, request.rate_hz);
        PathState state = state_;
        state.gain_db += faults.gain_error_db;
        out_v = through_preamp(setup_.simulated, preamp_, setup_, state, differential_v, common_v,
                               request.rate_hz, noise);
    }
    const auto& interface = setup_.simulated.interface;
    std::vector<std::vector<float>> channels;
    for (int input = 1; input <= request.input_channels; ++input) {
        const bool device = std::find(routing.device_inputs.begin(), routing.device_inputs.end(), input) !=
                            routing.device_inputs.end();
        const bool reference = routing.reference_input && *routing.reference_input == input;
        const double full_scale = reference ? reference_full_scale_dbu() : interface.input_full_scale_dbu;
        const std::vector<double>* heard = &nothing;
        if (device && !(faults.output_in_reference && !loop)) heard = &out_v;
        if (reference) heard = faults.output_in_reference && !loop ? &out_v : &driven_v;
        channels.push_back(
            through_input(*heard, full_scale, reference ? nothing : driven_v, request.rate_hz, noise));
        spoil_input(channels.back(), request.rate_hz, faults);
    }
    return channels;
}

double SimulatedBackend::reference_full_scale_dbu() const {
    const auto& interface = setup_.simulated.interface;
    if (interface.reference_full_scale_dbu) return *interface.reference_full_scale_dbu;
    return setup_.calibration && setup_.calibration->reference_full_scale_dbu
               ? *setup_.calibration->reference_full_scale_dbu
               : interface.input_full_scale_dbu;
}

}  // namespace

std::unique_ptr<Backend> make_simulated_backend(const Setup& setup) {
    return std::make_unique<SimulatedBackend>(setup);
}

}  // namespace coldpin::rig
