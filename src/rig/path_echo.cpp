#include <algorithm>
#include <cmath>

#include <fmt/core.h>

#include "coldpin/spectrum/fft.h"
#include "coldpin/spectrum/statistics.h"
#include "coldpin/spectrum/window.h"
#include "coldpin/units/level.h"

#include "path_looks.h"

namespace coldpin::rig {

using spectrum::median;

namespace {

constexpr double echo_ratio = 0.0022;  // -53 dB

}  // namespace

// An echo makes the logarithm of the response ripple along frequency: a line in its spectrum (Bogert,
// Healy and Tukey 1963), far from the slow course that filters give it.
void look_for_echo(const PathRecording& heard, PathReport& report) {
    if (report.finding(PathFault::frames_lost) != nullptr) return;
    const auto first = static_cast<std::size_t>(400.0 / heard.bin_hz),
               last = static_cast<std::size_t>(std::min(15000.0, 0.36 * heard.rate) / heard.bin_hz);
    std::vector<double> logarithm;
    double mean = 0.0;
    for (std::size_t k = first; k < last; ++k) {
        logarithm.push_back(std::log(std::abs(heard.transfer[k]) + 1e-12));
        mean += logarithm.back();
    }
    mean /= static_cast<double>(logarithm.size());
    const auto window = spectrum::window_samples(spectrum::Window::blackman_harris, logarithm.size());
    double weight = 0.0;
    for (std::size_t k = 0; k < logarithm.size(); ++k) {
        logarithm[k] = (logarithm[k] - mean) * window[k];
        weight += window[k];
    }
    const std::size_t size = spectrum::fast_fft_size(4 * logarithm.size());
    const auto ripple = spectrum::forward_fft(logarithm, size);
    const double seconds_per_bin = 1.0 / (heard.bin_hz * static_cast<double>(size));
    const auto nearest = static_cast<std::size_t>(0.0006 / seconds_per_bin),
               farthest = std::min(ripple.size(), static_cast<std::size_t>(0.045 / seconds_per_bin));
    std::vector<double> sizes;
    double strongest = 0.0;
    std::size_t where = 0;
    for (std::size_t q = nearest; q < farthest; ++q) {
        sizes.push_back(2.0 / weight * std::abs(ripple[q]));
        if (sizes.back() > strongest) {
            strongest = sizes.back();
            where = q;
        }
    }
    if (strongest < std::max(echo_ratio, 9.0 * median(sizes))) return;
    add(report, PathFault::echo,
        fmt::format("An echo {:.1f} dB down, {:.2f} ms later: the input is mixed back into the output. Turn "
                    "monitoring "
                    "off in the interface's mixer, and \"listen to this device\" in the operating system.",
                    -units::db_from_ratio(strongest), 1000.0 * seconds_per_bin * static_cast<double>(where)));
}

}  // namespace coldpin::rig
