// Recorded samples in memory: planar, double, full scale = 1.0.
#pragma once

#include <cstddef>
#include <span>
#include <string>
#include <vector>

namespace coldpin::signal {

struct Recording {
    double rate_hz = 0.0;
    std::vector<std::vector<double>> channels;  // all of one length

    std::size_t frames() const noexcept { return channels.empty() ? 0 : channels.front().size(); }

    // Samples of a channel counted from 1, as on an interface's front. Throws UsageError naming `source` and
    // how many channels there are when there is no such channel.
    std::span<const double> channel(int number, const std::string& source = "the recording") const;
};

}  // namespace coldpin::signal
