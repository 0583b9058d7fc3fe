// Full duplex through PortAudio. Each take opens the stream, runs it and closes it again, all from one thread
// of its own, so that a driver that never answers can be left behind instead of hanging the program.
#include <algorithm>
#include <atomic>
#include <chrono>
#include <cmath>
#include <condition_variable>
#include <exception>
#include <memory>
#include <mutex>
#include <thread>

#include <fmt/core.h>
#include <portaudio.h>

#include "coldpin/units/error.h"

#include "audio_callback.h"
#include "backends.h"
#include "portaudio_devices.h"
#include "stderr_silencer.h"

namespace coldpin::rig {

namespace {

using Clock = std::chrono::steady_clock;
using Seconds = std::chrono::duration<double>;

constexpr double first_call_s = 3.0;     // some systems take two seconds to begin
constexpr double least_silence_s = 0.5;  // of callbacks, before the stream counts as dead
constexpr double periods_of_silence = 10.0;
constexpr double teardown_s = 2.0;  // a dead server makes closing hang for ten minutes
constexpr int poll_ms = 10;

std::atomic<bool> abandoned{false};

int on_audio(const void* in, void* out, unsigned long frames, const PaStreamCallbackTimeInfo*,
             PaStreamCallbackFlags flags, void* user) {
    auto& exchange = *static_cast<AudioExchange*>(user);
    const bool done =
        exchange_block(exchange, static_cast<const float* const*>(in), static_cast<float* const*>(out),
                       frames, static_cast<std::uint32_t>(flags));
    return done ? paComplete : paContinue;
}

std::string flag_words(std::uint32_t bits) {
    std::string words;
    const auto add = [&](std::uint32_t bit, const char* word) {
        if ((bits & bit) != 0) words += std::string(words.empty() ? "" : ", ") + word;
    };
    add(paInputUnderflow, "input underflow");
    add(paInputOverflow, "input overflow");
    add(paOutputUnderflow, "output underflow");
    add(paOutputOverflow, "output overflow");
    add(paPrimingOutput, "priming");
    return words.empty() ? "unknown flag" : words;
}

// Shared by the waiting thread and the audio system's; outlives whichever is left behind.
struct Job {
    Job(AudioSetup audio_setup, std::vector<std::vector<float>> play, int inputs, double rate)
        : audio(std::move(audio_setup)),
          input_channels(inputs),
          rate_hz(rate),
          exchange(std::move(play), static_cast<std::size_t>(inputs), rate) {}
    AudioSetup audio;
    int input_channels;
    double rate_hz;
    AudioExchange exchange;

    std::mutex mutex;
    std::condition_variable changed;
    bool recorded = false;  // all frames are in, or a reason is known
    bool closed = false;
    std::exception_ptr failure;
};

void check(PaError error, const std::string& what, const Job& job) {
    if (error == paNoError) return;
    if (error == paInvalidSampleRate)
        throw UsageError(
            fmt::format("the audio device refuses {:g} Hz: set sample_rate_hz in the rig file to a rate that "
                        "coldpin devices lists",
                        job.rate_hz));
    if (error == paInvalidChannelCount)
        throw UsageError(
            fmt::format("the audio device has fewer than {} output or {} input channels: see coldpin devices",
                        job.exchange.play.size(), job.input_channels));
    if (error == paDeviceUnavailable)
        throw CannotMeasure(
            what + ": the audio device is busy or gone: close other programs that use it, then try again");
    const PaHostErrorInfo* host = error == paUnanticipatedHostError ? Pa_GetLastHostErrorInfo() : nullptr;
    throw CannotMeasure(fmt::format(
        "{}: {}{}", what, Pa_GetErrorText(error),
        host != nullptr && host->errorText != nullptr ? std::string(" (") + host->errorText + ")" : ""));
}

// Waits for the end of the take; throws when callbacks stay away. Content, not flags, decides about the
// samples.
void wait_for_frames(Job& job, PaStream* stream) {
    std::uint64_t calls = 0;
    auto last_sign = Clock::now();
    const auto begun = last_sign;
    while (!job.exchange.finished.load(std::memory_order_acquire)) {
        std::this_thread::sleep_for(std::chrono::milliseconds(poll_ms));
        const auto now = Clock::now();
        const std::uint64_t seen = job.exchange.calls.load(std::memory_order_acquire);
        if (seen != calls) {
            calls = seen;
            last_sign = now;
            continue;
        }
        const double quiet_s = Seconds(now - last_sign).count();
        const double period_s = static_cast<double>(job.exchange.period.load()) / job.rate_hz;
        const double allowed_s =
            calls == 0 ? first_call_s : std::max(least_silence_s, periods_of_silence * period_s);
        const bool ended = calls > 0 && quiet_s > 0.1 && Pa_IsStreamActive(stream) == 0;
        // A stream that others stop for a while (a stalled device) comes back: it is given four times as long
        // while it still calls itself active.
        if (ended || quiet_s > (calls == 0 ? allowed_s : 4.0 * allowed_s))
            throw CannotMeasure(fmt::format(
                "the audio device stopped {:.1f} s into the capture ({}): is it still connected, is the "
                "sound server running?",
                Seconds(last_sign - begun).count(), ended ? "its stream ended" : "it stays silent"));
    }
}

void run(const std::shared_ptr<Job>& job) {
    const auto tell = [&](bool closed, const std::exception_ptr& failure) {
        const std::lock_guard lock(job->mutex);
        job->recorded = true;
        job->closed = job->closed || closed;
        if (failure && !job->failure) job->failure = failure;
        job->changed.notify_all();
    };
    try {
        const PortAudioLibrary library;
        PaStream* stream = nullptr;
        try {
            const StderrSilencer quiet;
            const auto& audio = job->audio;
            PaStreamParameters in{}, out{};
            out.device = find_device(audio.output_device, audio.host_api, false);
            in.device = find_device(audio.input_device.empty() ? audio.output_device : audio.input_device,
                                    audio.host_api, true);
            out.channelCount = static_cast<int>(job->exchange.play.size());
            in.channelCount = job->input_channels;
            const PaDeviceInfo *in_info = Pa_GetDeviceInfo(in.device),
                               *out_info = Pa_GetDeviceInfo(out.device);
            if (out.channelCount > out_info->maxOutputChannels || in.channelCount > in_info->maxInputChannels)
                throw UsageError(
                    fmt::format("the rig needs {} output(s) and {} input(s); '{}' has {} and '{}' has {}",
                                out.channelCount, in.channelCount, out_info->name,
                                out_info->maxOutputChannels, in_info->name, in_info->maxInputChannels));
            in.sampleFormat = out.sampleFormat = paFloat32 | paNonInterleaved;
            // Generous: a measurement minds losses, not waiting.
            in.suggestedLatency = in_info->defaultHighInputLatency;
            out.suggestedLatency = out_info->defaultHighOutputLatency;
            if (!std::isfinite(in.suggestedLatency) || in.suggestedLatency > 10.0 ||
                in.suggestedLatency < 0.0)
                in.suggestedLatency = 0.1;
            if (!std::isfinite(out.suggestedLatency) || out.suggestedLatency > 10.0 ||
                out.suggestedLatency < 0.0)
                out.suggestedLatency = 0.1;
            check(Pa_OpenStream(&stream, &in, &out, job->rate_hz, audio.frames_per_buffer,
                                paClipOff | paDitherOff, on_audio, &job->exchange),
                  "the audio device cannot be opened", *job);
            check(Pa_StartStream(stream), "the audio device cannot be started", *job);
        } catch (...) {
            if (stream != nullptr) Pa_CloseStream(stream);
            throw;
        }
        std::exception_ptr failure;
        try {
            wait_for_frames(*job, stream);
        } catch (...) {
            failure = std::current_exception();
        }
        tell(false, failure);
        const StderrSilencer quiet;
        if (failure)
            Pa_AbortStream(stream);
        else
            Pa_StopStream(stream);
        Pa_CloseStream(stream);
    } catch (...) {
        tell(true, std::current_exception());
        return;
    }
    tell(true, nullptr);
}

class PortAudioBackend : public Backend {
  public:
    explicit PortAudioBackend(const Setup& setup) : audio_(setup.audio) {
        // Names are looked up at once, so that a wrong one is told before anything else is asked of a person.
        const PortAudioLibrary library;
        const StderrSilencer quiet;
        const PaDeviceInfo* out = Pa_GetDeviceInfo(find_device(audio_.output_device, audio_.host_api, false));
        const PaDeviceInfo* in = Pa_GetDeviceInfo(find_device(
            audio_.input_device.empty() ? audio_.output_device : audio_.input_device, audio_.host_api, true));
        description_ =
            fmt::format("{} ({}), {:g} kHz", out->name, host_api_name(*out), audio_.sample_rate_hz / 1000.0);
        if (in != out) description_ += fmt::format(", recording from {}", in->name);
    }

    Take play_and_record(const TakeRequest& request, const std::atomic<bool>* stop) override;
    bool rewire(const Wiring&) override { return false; }
    std::string description() const override { return description_; }

  private:
    AudioSetup audio_;
    std::string description_;
};

Take PortAudioBackend::play_and_record(const TakeRequest& request, const std::atomic<bool>* stop) {
    if (abandoned)
        throw CannotMeasure("the audio system hung before and was left behind: start the program again");
    if (request.play.empty() || request.play.front().empty()) throw UsageError("there is nothing to play");
    auto job =
        std::make_shared<Job>(audio_, request.play, std::max(1, request.input_channels), request.rate_hz);
    std::thread worker(run, job);
    {
        std::unique_lock lock(job->mutex);
        // First the frames, for as long as it takes (the watchdog is in the worker; if even that hangs inside
        // the audio system, twice the length and some is the end of patience), then the closing.
        const double patience_s =
            2.0 * static_cast<double>(request.play.front().size()) / request.rate_hz + 10.0;
        const auto deadline = Clock::now() + std::chrono::duration_cast<Clock::duration>(Seconds(patience_s));
        while (!job->recorded && Clock::now() < deadline) {
            job->changed.wait_for(lock, std::chrono::milliseconds(poll_ms));
            if (stop != nullptr && stop->load()) job->exchange.stop.store(true);
        }
        job->changed.wait_for(lock, std::chrono::duration_cast<Clock::duration>(Seconds(teardown_s)),
                              [&] { return job->closed; });
        if (!job->closed) {
            abandoned = true;
            StderrSilencer::lift();
            worker.detach();
            const std::exception_ptr failure = job->failure;
            lock.unlock();
            if (failure) std::rethrow_exception(failure);
            throw CannotMeasure(
                "the audio system does not answer any more (its server is gone, or the driver hangs); it was "
                "left behind");
        }
    }
    worker.join();
    if (job->failure) std::rethrow_exception(job->failure);
    if (stop != nullptr && stop->load())
        throw CannotMeasure("interrupted: the outputs are silent, nothing of this take was kept");
    Take take;
    take.recorded = std::move(job->exchange.record);
    const std::size_t flags = job->exchange.flag_count.load();
    for (std::size_t i = 0; i < std::min(flags, job->exchange.flags.size()); ++i)
        take.driver_flags.push_back(fmt::format("{} at frame {}", flag_words(job->exchange.flags[i].bits),
                                                job->exchange.flags[i].frame));
    if (flags > job->exchange.flags.size())
        take.driver_flags.push_back(fmt::format("and {} more", flags - job->exchange.flags.size()));
    return take;
}

}  // namespace

std::unique_ptr<Backend> make_portaudio_backend(const Setup& setup) {
    return std::make_unique<PortAudioBackend>(setup);
}

bool teardown_was_abandoned() noexcept {
    return abandoned;
}

}  // namespace coldpin::rig
