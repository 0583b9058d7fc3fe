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
#include "simulated_path.h"

namespace coldpin::rig {

namespace {

constexpr double two_pi = 2.0 * std::numbers::pi;
constexpr double noise_band_hz = 19980.0;  // the band that the interface's noise levels are stated for
constexpr std::size_t frames_lost = 7, frames_repeated = 32, frames_zeroed = 40;

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
    std::vector<double> out_volts(const TakeRequest& request, int output, Gaussian& noise) const;
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

std::vector<double> SimulatedBackend::out_volts(const TakeRequest& request, int output,
                                                Gaussian& noise) const {
    const auto& interface = setup_.simulated.interface;
    const double volts = volts_at_full_scale(interface.output_full_scale_dbu);
    const double noise_rms = units::sample_rms_from_dbfs(interface.output_noise_dbfs) *
                             std::sqrt(0.5 * request.rate_hz / noise_band_hz);
    // Half of the loop's distortion arises here, half at the input.
    const double second = units::ratio_from_db(interface.second_harmonic_db),
                 third = 2.0 * units::ratio_from_db(interface.third_harmonic_db);
    std::vector<double> out(request.play.front().size());
    const auto index = static_cast<std::size_t>(output) - 1;
    for (std::size_t n = 0; n < out.size(); ++n) {
        const double x = index < request.play.size() ? static_cast<double>(request.play[index][n]) : 0.0;
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
    add_hum(samples, units::sample_rms_from_dbfs(interface.ground_loop_hum_dbfs), -6.0, interface,
            state_.start_s, rate_hz);
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
    for (auto& channel : recorded) {
        const std::size_t middle = channel.size() / 2;
        const auto at = channel.begin() + static_cast<std::ptrdiff_t>(middle);
        if (faults.unplugged) std::fill(channel.begin(), channel.end(), 0.0F);
        if (hit(faults.lose_frames_in_takes) && middle + frames_lost < channel.size()) {
            channel.erase(at, at + frames_lost);
            channel.insert(channel.end(), frames_lost, channel.back());
            std::copy(channel.begin(), channel.begin() + frames_lost,
                      channel.end() - frames_lost);  // what came next
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
    Gaussian noise(setup_.simulated.seed * 1000003ULL + static_cast<unsigned long>(takes_));
    const auto& routing = setup_.routing;
    const auto pad_v = out_volts(request, routing.differential_output, noise);
    const auto feed_v =
        routing.common_mode_output ? out_volts(request, *routing.common_mode_output, noise) : pad_v;
    // With one output its plug sits in one of the two places; the other hears nothing.
    const bool pad_fed = routing.common_mode_output || plug_ != Plug::common_mode_feed;
    const bool common_fed = routing.common_mode_output || plug_ == Plug::common_mode_feed;
    std::vector<double> differential_v(frames, 0.0), common_v(frames, 0.0), driven_v(frames, 0.0);
    const double pad = pad_fed ? units::ratio_from_db(-setup_.fixture.differential_loss_db) : 0.0;
    const double feed = common_fed ? units::ratio_from_db(-setup_.fixture.common_mode_loss_db) : 0.0;
    for (std::size_t n = 0; n < frames; ++n) {
        differential_v[n] = pad * pad_v[n];
        common_v[n] = feed * feed_v[n];
        driven_v[n] = routing.common_mode_output ? pad_v[n] + feed_v[n] : pad_v[n];
    }
    state_.start_s +=
        static_cast<double>(frames) / request.rate_hz + 1.7;  // as if a moment passed between takes
    const auto out_v = through_preamp(setup_.simulated, preamp_, setup_, state_, differential_v, common_v,
                                      request.rate_hz, noise);

    Take take;
    const auto& interface = setup_.simulated.interface;
    const std::vector<double> nothing(frames, 0.0);
    for (int input = 1; input <= request.input_channels; ++input) {
        const bool device = std::find(routing.device_inputs.begin(), routing.device_inputs.end(), input) !=
                            routing.device_inputs.end();
        const bool reference = routing.reference_input && *routing.reference_input == input;
        const double full_scale =
            reference && setup_.calibration && setup_.calibration->reference_full_scale_dbu
                ? *setup_.calibration->reference_full_scale_dbu
                : interface.input_full_scale_dbu;
        take.recorded.push_back(through_input(device ? out_v : (reference ? driven_v : nothing), full_scale,
                                              reference ? nothing : driven_v, request.rate_hz, noise));
    }
    damage(take.recorded);
    return take;
}

}  // namespace

std::unique_ptr<Backend> make_simulated_backend(const Setup& setup) {
    return std::make_unique<SimulatedBackend>(setup);
}

}  // namespace coldpin::rig
