// The quantities that requirements may name: which measurement gives them, in which units, under which
// conditions. One table, so that profiles, judging and reports agree.
#pragma once

#include <string>
#include <string_view>
#include <vector>

namespace coldpin::profile {

struct Quantity {
    std::string_view name;                     // "noise_input_referred"
    std::string_view measure;                  // plan kind that gives it: "noise"
    std::string_view words;                    // "noise at the input": for sheets and sentences
    std::vector<std::string_view> units;       // accepted in requirements, first is usual
    std::vector<std::string_view> conditions;  // keys that may narrow it: "weighting", "frequency_hz"
    bool is_curve = false;                     // takes a mask instead of min and max
    bool more_is_better = false;               // rejection: the interesting limit is the lower one
};

const std::vector<Quantity>& quantities();
const Quantity* find_quantity(std::string_view name);  // nullptr when unknown
const std::vector<std::string_view>& measure_kinds();  // gain, response, noise, hum, cmrr,
                                                       // distortion, polarity, latency

// Those, and what only stored recordings can be asked: crosstalk.
const std::vector<std::string_view>& analysis_kinds();

// The candidate with the smallest edit distance to `word`, the first of equals; upper and lower case count as
// the same. Empty when none is near (more than half the word would have to change).
std::string nearest_word(std::string_view word, const std::vector<std::string_view>& candidates);

}  // namespace coldpin::profile
