#include "instructions.h"

#include <fmt/core.h>

namespace coldpin::check {

std::vector<std::string> instructions(const rig::Wiring& from, const rig::Wiring& to,
                                      const rig::Setup& setup) {
    std::vector<std::string> sentences;
    if (from.unit_channel != to.unit_channel)
        sentences.push_back(fmt::format(
            "Move the preamp's input plug and output plug to channel '{}' of the unit.", to.unit_channel));
    if (from.setting != to.setting)
        sentences.push_back(fmt::format("Set the gain control to '{}'.", to.setting));
    if (from.plug != to.plug) {
        const char* place =
            to.plug == rig::Plug::common_mode_feed ? "the common-mode feed" : "the differential pad";
        const char* old =
            from.plug == rig::Plug::common_mode_feed ? "the common-mode feed" : "the differential pad";
        sentences.push_back(fmt::format("Move the plug of interface output {} from {} to {}.",
                                        setup.routing.differential_output, old, place));
    }
    return sentences;
}

}  // namespace coldpin::check
