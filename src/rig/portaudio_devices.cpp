#include "portaudio_devices.h"

#include <algorithm>
#include <cctype>

#include <fmt/core.h>

#include "coldpin/rig/devices.h"
#include "coldpin/units/error.h"

#include "stderr_silencer.h"

namespace coldpin::rig {

namespace {

constexpr double common_rates_hz[] = {44100.0, 48000.0, 88200.0, 96000.0, 192000.0};

std::string lower(std::string text) {
    std::transform(text.begin(), text.end(), text.begin(),
                   [](unsigned char c) { return static_cast<char>(std::tolower(c)); });
    return text;
}

bool holds(const std::string& whole, const std::string& part) {
    return lower(whole).find(lower(part)) != std::string::npos;
}

PaStreamParameters parameters_for(PaDeviceIndex device, int channels) {
    PaStreamParameters parameters{};
    parameters.device = device;
    parameters.channelCount = channels;
    parameters.sampleFormat = paFloat32 | paNonInterleaved;
    parameters.suggestedLatency = 0.1;
    return parameters;
}

std::string verdict_for(const AudioDevice& device) {
    if (device.input_channels == 0 && device.output_channels == 0) return "has no channels";
    if (device.input_channels == 0) return "plays only: it cannot record what comes back";
    if (device.output_channels == 0) return "records only: it cannot play a stimulus";
    if (device.common_rates_hz.empty())
        return "plays and records, but accepted none of the common sample rates at once";
    if (device.output_channels == 1)
        return "can serve with one output: the plug is moved between pad and common-mode feed";
    if (device.input_channels == 1)
        return "can serve for whole checks without moving a cable, but without a reference input";
    return "can serve for whole checks without moving a cable, with a reference input";
}

}  // namespace

PortAudioLibrary::PortAudioLibrary() {
    const StderrSilencer quiet;
    const PaError error = Pa_Initialize();
    if (error != paNoError)
        throw CannotMeasure(fmt::format("the audio system does not start: {}", Pa_GetErrorText(error)));
}

PortAudioLibrary::~PortAudioLibrary() {
    const StderrSilencer quiet;
    Pa_Terminate();
}

std::string host_api_name(const PaDeviceInfo& info) {
    const PaHostApiInfo* api = Pa_GetHostApiInfo(info.hostApi);
    return api != nullptr ? api->name : "unknown";
}

PaDeviceIndex find_device(const std::string& name, const std::string& host_api, bool for_input) {
    std::vector<PaDeviceIndex> exact, partial;
    std::string there;
    for (PaDeviceIndex i = 0; i < Pa_GetDeviceCount(); ++i) {
        const PaDeviceInfo* info = Pa_GetDeviceInfo(i);
        if (info == nullptr || (for_input ? info->maxInputChannels : info->maxOutputChannels) < 1) continue;
        if (!host_api.empty() && !holds(host_api_name(*info), host_api)) continue;
        there += fmt::format("{}'{}' ({})", there.empty() ? "" : ", ", info->name, host_api_name(*info));
        if (name == info->name)
            exact.push_back(i);
        else if (!name.empty() && holds(info->name, name))
            partial.push_back(i);
    }
    const auto& found = exact.empty() ? partial : exact;
    if (found.size() == 1) return found.front();
    const char* role = for_input ? "input" : "output";
    if (found.empty())
        throw CannotMeasure(fmt::format("no audio {} device is named '{}'{}; there {}: see coldpin devices",
                                        role, name,
                                        host_api.empty() ? "" : " under host API '" + host_api + "'",
                                        there.empty() ? "is none" : "are " + there));
    throw UsageError(
        fmt::format("more than one audio {} device is named like '{}': say which by its full name, or set "
                    "host_api (see coldpin devices)",
                    role, name));
}

std::vector<AudioDevice> list_devices() {
    const PortAudioLibrary library;
    const StderrSilencer quiet;
    std::vector<AudioDevice> devices;
    for (PaDeviceIndex i = 0; i < Pa_GetDeviceCount(); ++i) {
        const PaDeviceInfo* info = Pa_GetDeviceInfo(i);
        if (info == nullptr) continue;
        AudioDevice device;
        device.name = info->name;
        device.host_api = host_api_name(*info);
        device.input_channels = info->maxInputChannels;
        device.output_channels = info->maxOutputChannels;
        device.default_rate_hz = info->defaultSampleRate;
        if (device.input_channels > 0 && device.output_channels > 0) {
            const auto in = parameters_for(i, 1), out = parameters_for(i, 1);
            for (double rate : common_rates_hz)
                if (Pa_IsFormatSupported(&in, &out, rate) == paFormatIsSupported)
                    device.common_rates_hz.push_back(rate);
        }
        device.can_serve = !device.common_rates_hz.empty();
        device.verdict = verdict_for(device);
        devices.push_back(device);
    }
    return devices;
}

}  // namespace coldpin::rig
