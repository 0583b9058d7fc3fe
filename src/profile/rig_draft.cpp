#include "coldpin/profile/rig_draft.h"

#include <fmt/core.h>

#include "coldpin/profile/rig_writer.h"
#include "coldpin/rig/fixture_figures.h"

#include "toml_text.h"

namespace coldpin::profile {

namespace {

constexpr double expected_rejection_db = 60.0;

rig::FixtureParts usual_parts(bool two_outputs) {
    rig::FixtureParts parts;
    parts.name = two_outputs ? "injection head, 40 dB" : "40 dB pad and separate feed";
    parts.pad =
        rig::Pad{two_outputs ? rig::PadKind::driven_centre : rig::PadKind::split, 7500.0, 150.0, 0.001};
    if (!two_outputs) parts.feed = rig::CommonModeFeed{75.0, 0.001};
    parts.blocking_farads = 470e-6;
    parts.preamp = {2000.0, 3400.0};
    return parts;
}

}  // namespace

std::string rig_text_for(const RigChoice& choice) {
    std::string text = fmt::format(
        "# Made by coldpin calibrate. Look at [fixtures.head] and [limits] before the first run.\n"
        "#\n"
        "# BEFORE CONNECTING: phantom power off, and measured off, at the preamp; monitors and headphones "
        "off. Never lift a\n"
        "# safety earth to cure hum. Follow your local codes.\n"
        "schema = \"coldpin-rig/1\"\n"
        "name = {}\n"
        "temperature_c = 22.0             # of the fixture's resistors, for their noise\n\n"
        "[audio]\n"
        "backend = \"portaudio\"\n"
        "device = {}\n",
        quoted(choice.name), quoted(choice.device));
    if (!choice.host_api.empty()) text += fmt::format("host_api = {}\n", quoted(choice.host_api));
    text += fmt::format("sample_rate_hz = {:.0f}\n\n[outputs]\ndifferential = {}\n", choice.sample_rate_hz,
                        choice.differential_output);
    if (choice.common_mode_output) text += fmt::format("common_mode = {}\n", *choice.common_mode_output);
    text += fmt::format("\n[inputs]\ndevice = {}\n", choice.device_input);
    if (choice.reference_input) text += fmt::format("reference = {}\n", *choice.reference_input);
    text += fmt::format(
        "\n# From profiles/fixtures: coldpin fixture FILE --rig THIS-FILE computes it from your own "
        "resistors.\n"
        "[fixtures.head]\n{}\n"
        "# Never exceeded, whatever a plan asks.\n"
        "[limits]\n"
        "max_preamp_input_dbu = -20.0\n"
        "max_preamp_common_mode_dbu = 6.0\n"
        "max_preamp_output_dbu = 18.0\n",
        fixture_lines(
            rig::fixture_for_rig(usual_parts(choice.common_mode_output.has_value()), expected_rejection_db)));
    return text;
}

}  // namespace coldpin::profile
