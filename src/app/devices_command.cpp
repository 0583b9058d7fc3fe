#include <algorithm>
#include <string>

#include <fmt/core.h>
#include <nlohmann/json.hpp>

#include "coldpin/rig/devices.h"

#include "commands.h"
#include "exit_status.h"
#include "terminal.h"

namespace coldpin::app {

namespace {

std::string as_json(const std::vector<rig::AudioDevice>& devices) {
    nlohmann::ordered_json list = nlohmann::ordered_json::array();
    for (const auto& device : devices)
        list.push_back({{"name", device.name},
                        {"host_api", device.host_api},
                        {"input_channels", device.input_channels},
                        {"output_channels", device.output_channels},
                        {"default_rate_hz", device.default_rate_hz},
                        {"common_rates_hz", device.common_rates_hz},
                        {"can_serve", device.can_serve},
                        {"verdict", device.verdict}});
    return nlohmann::ordered_json{{"schema", "coldpin-devices/1"}, {"devices", list}}.dump(2) + "\n";
}

std::string as_text(const std::vector<rig::AudioDevice>& devices) {
    if (devices.empty())
        return "No audio device was found on this machine.\n"
               "Plug the interface in and call again; without one, --rig simulated does everything.\n";
    std::string text;
    for (const auto& device : devices) {
        std::string rates;
        for (double rate : device.common_rates_hz)
            rates += fmt::format("{}{:g}", rates.empty() ? "" : ", ", rate / 1000.0);
        text += fmt::format("{} {}\n    host API {}, {} in, {} out{}\n    {}\n", device.can_serve ? "●" : "○",
                            device.name, device.host_api, device.input_channels, device.output_channels,
                            rates.empty() ? "" : fmt::format(", {} kHz", rates), device.verdict);
    }
    const auto able =
        std::count_if(devices.begin(), devices.end(), [](const auto& d) { return d.can_serve; });
    text += fmt::format("\n{} of {} can serve (●). Name one in a rig file: docs/rig.md says how.\n", able,
                        devices.size());
    return text;
}

}  // namespace

void add_devices(CLI::App& program, Action& action) {
    auto json = std::make_shared<bool>(false);
    CLI::App* command =
        program.add_subcommand("devices", "the audio devices of this machine, and which can serve");
    command->add_flag("--json", *json, "one JSON document on standard output");
    command->footer("Example:\n  coldpin devices");
    command->callback([json, &action] {
        action = [json] {
            const auto devices = rig::list_devices();
            print(*json ? as_json(devices) : as_text(devices));
            return exit_passed;
        };
    });
}

}  // namespace coldpin::app
