#include "coldpin/profile/quantities.h"

#include <algorithm>

#include "edit_distance.h"

namespace coldpin::profile {

const std::vector<Quantity>& quantities() {
    static const std::vector<Quantity> all = {
        {"gain", "gain", "gain", {"dB"}, {"frequency_hz"}},
        {"output_level", "gain", "output level", {"dBu", "dBV", "V"}, {"frequency_hz"}},
        {"lower_corner", "response", "lower corner (-3 dB)", {"Hz"}, {}},
        {"upper_corner", "response", "upper corner (-3 dB)", {"Hz"}, {}, false, true},
        {"response_deviation", "response", "largest deviation from flat", {"dB"}, {}},
        {"magnitude", "response", "response", {"dB"}, {}, true},
        {"phase", "response", "phase", {"degree"}, {}, true},
        {"group_delay", "response", "group delay", {"s"}, {}, true},
        {"harmonic_2", "response", "second harmonic", {"dB"}, {}, true},
        {"harmonic_3", "response", "third harmonic", {"dB"}, {}, true},
        {"harmonic_4", "response", "fourth harmonic", {"dB"}, {}, true},
        {"harmonic_5", "response", "fifth harmonic", {"dB"}, {}, true},
        {"noise_output",
         "noise",
         "noise at the output",
         {"dBu", "dBV", "V", "dBFS"},
         {"weighting", "detector"}},
        {"noise_input_referred",
         "noise",
         "noise at the input",
         {"dBu", "dBV", "V"},
         {"weighting", "detector"}},
        {"noise_figure", "noise", "noise figure", {"dB"}, {}},
        {"noise_density", "noise", "noise density", {"V/sqrt(Hz)"}, {}, true},
        {"mains_frequency", "hum", "mains frequency", {"Hz"}, {}},
        {"hum_output", "hum", "hum at the output", {"dBu", "dBV", "V", "dBFS"}, {}},
        {"hum_input_referred", "hum", "hum at the input", {"dBu", "dBV", "V"}, {}},
        {"hum_harmonic", "hum", "hum harmonic", {"dBu", "dBV", "V", "dBFS"}, {"harmonic"}},
        {"hum_to_noise", "hum", "hum over noise", {"dB"}, {}},
        {"common_mode_rejection", "cmrr", "common-mode rejection", {"dB"}, {"frequency_hz"}, false, true},
        {"thd", "distortion", "harmonic distortion", {"%"}, {"frequency_hz"}},
        {"thd_n", "distortion", "distortion and noise", {"%"}, {"frequency_hz"}},
        {"sinad", "distortion", "signal over noise and distortion", {"dB"}, {"frequency_hz"}, false, true},
        {"harmonic", "distortion", "harmonic", {"dB"}, {"harmonic", "frequency_hz"}},
        {"polarity", "polarity", "polarity", {""}, {}},
        {"latency", "latency", "latency of the path", {"frames"}, {}},
    };
    return all;
}

const Quantity* find_quantity(std::string_view name) {
    const auto& all = quantities();
    const auto found =
        std::find_if(all.begin(), all.end(), [&](const Quantity& one) { return one.name == name; });
    return found != all.end() ? &*found : nullptr;
}

const std::vector<std::string_view>& measure_kinds() {
    static const std::vector<std::string_view> kinds = {"gain", "response",   "noise",    "hum",
                                                        "cmrr", "distortion", "polarity", "latency"};
    return kinds;
}

const std::vector<std::string_view>& analysis_kinds() {
    static const std::vector<std::string_view> kinds = [] {
        auto all = measure_kinds();
        all.push_back("crosstalk");
        return all;
    }();
    return kinds;
}

std::string nearest_word(std::string_view word, const std::vector<std::string_view>& candidates) {
    constexpr std::size_t longest = 200;  // no key is longer; a mistyped page of text must not cost seconds
    word = word.substr(0, longest);
    std::string_view best;
    std::size_t least = word.size() / 2 + 1;
    for (std::string_view candidate : candidates) {
        if (candidate.empty()) continue;
        const std::size_t distance = edit_distance(word, candidate.substr(0, longest));
        if (distance < least) {
            least = distance;
            best = candidate;
        }
    }
    return std::string(best);
}

}  // namespace coldpin::profile
