#include "coldpin/signal/recording.h"

#include <fmt/core.h>

#include "coldpin/units/error.h"

namespace coldpin::signal {

std::span<const double> Recording::channel(int number, const std::string& source) const {
    if (number < 1 || static_cast<std::size_t>(number) > channels.size())
        throw UsageError(fmt::format("{}: there is no channel {}; it has {} (counted from 1)", source, number,
                                     channels.size()));
    return channels[static_cast<std::size_t>(number) - 1];
}

}  // namespace coldpin::signal
