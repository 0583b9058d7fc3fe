#include "coldpin/rig/content_check.h"

#include <algorithm>
#include <cmath>
#include <unordered_map>

#include <fmt/core.h>

#include "continuity.h"

namespace coldpin::rig {

namespace {

constexpr std::size_t zeros_in_a_row = 5;  // of a live input: its noise never lands on 0 that often
constexpr double coarse_share = 0.005;     // share of zeros from which the converter itself is that coarse
constexpr std::size_t repeated_in_a_row = 24;  // equal noisy samples a block apart: never by chance
constexpr std::size_t farthest_repeat = 16384;

void find_zeros(std::span<const double> channel, ContentReport& report) {
    std::size_t run = 0, zeros = 0, longest = 0, longest_end = 0, in_long_runs = 0;
    const auto close = [&](std::size_t end) {
        if (run >= zeros_in_a_row) in_long_runs += run;
        if (run > longest) {
            longest = run;
            longest_end = end;
        }
        run = 0;
    };
    for (std::size_t n = 0; n < channel.size(); ++n) {
        if (channel[n] == 0.0) {
            ++run;
            ++zeros;
        } else {
            close(n);
        }
    }
    close(channel.size());
    if (longest < zeros_in_a_row) return;
    if (longest == channel.size()) {
        report.glitches.push_back(
            {"exact zeros throughout: the input is dead (device left, input off, or no permission to record)",
             0});
        return;
    }
    const double single_share =
        static_cast<double>(zeros - in_long_runs) / static_cast<double>(channel.size());
    if (single_share > coarse_share && longest < 64) return;
    report.glitches.push_back(
        {fmt::format("{} exact zeros in a row on a live input", longest), longest_end - longest});
}

// A block played twice by a driver: the same noisy samples again, bit for bit. Only where noise is what is
// heard; a clean tone repeats by nature.
void find_repeats(std::span<const double> channel, ContentReport& report) {
    std::unordered_map<double, std::size_t> last_seen;
    last_seen.reserve(channel.size() / 4);
    // Every eighth sample is remembered; a repeated run of 24 holds three of those.
    for (std::size_t n = 0; n + repeated_in_a_row < channel.size(); ++n) {
        const auto seen = last_seen.find(channel[n]);
        if (seen != last_seen.end() && channel[n] != 0.0) {
            const std::size_t before = seen->second;
            if (n > before + repeated_in_a_row / 2 && n - before < farthest_repeat) {
                std::size_t same = 0;
                while (n + same < channel.size() && channel[n + same] == channel[before + same] &&
                       same < 4 * repeated_in_a_row)
                    ++same;
                const bool constant = std::all_of(
                    channel.begin() + static_cast<std::ptrdiff_t>(n),
                    channel.begin() + static_cast<std::ptrdiff_t>(n + std::min<std::size_t>(same, 8)),
                    [&](double x) { return x == channel[n]; });
                if (same >= repeated_in_a_row && !constant) {
                    report.glitches.push_back({fmt::format("at least {} frames are repeated", same), n});
                    return;
                }
            }
        }
        if (n % 8 == 0) last_seen[channel[n]] = n;
    }
}

}  // namespace

ContentReport check_content(std::span<const double> channel, double rate_hz, const signal::Stimulus& stimulus,
                            std::optional<double> expected_delay_frames) {
    ContentReport report;
    if (channel.empty()) return report;
    find_zeros(channel, report);
    if (!report.whole()) return report;
    if (std::holds_alternative<signal::Silence>(stimulus.kind))
        find_repeats(channel, report);
    else
        check_continuity(channel, rate_hz, stimulus, expected_delay_frames, report);
    return report;
}

}  // namespace coldpin::rig
