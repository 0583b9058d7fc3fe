#include "introduction.h"

#include <fmt/core.h>

#include "coldpin/units/error.h"

namespace coldpin::app {

void introduce(const profile::DeviceProfile& device, const rig::Session& session,
               const check::CapturePlan& plan, TerminalBench& bench, bool yes) {
    if (session.setup().audio.backend != rig::BackendKind::portaudio) return;
    fmt::print(stderr, "{}\n", device.name);
    for (const auto& caution : device.cautions) fmt::print(stderr, "  Caution: {}\n", caution);
    fmt::print(stderr,
               "  Caution: phantom power off, and measured off, before the interface's output meets the "
               "preamp's input.\n"
               "  Caution: monitors and headphones on this interface off.\n");
    if (yes && !plan.changes.empty())
        throw UsageError(
            fmt::format("--yes, but this plan needs {} change(s) at the bench, the first: \"{}\"\n"
                        "Leave --yes out.",
                        plan.changes.size(), plan.changes.front()));
    if (yes) return;
    const rig::Wiring& first = plan.captures.front().request.wiring;
    std::string place;
    if (first.plug == rig::Plug::differential_pad)
        place = ", the interface's output into the differential pad";
    if (first.plug == rig::Plug::common_mode_feed)
        place = ", the interface's output into the common-mode feed";
    bench.ask(fmt::format(
        "Connect the unit{}{}{}.", first.unit_channel.empty() ? "" : ", channel " + first.unit_channel, place,
        first.setting.empty() ? "" : ", and set the gain control to '" + first.setting + "'"));
}

}  // namespace coldpin::app
