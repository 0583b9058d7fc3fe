#include "band_picture.h"

#include <algorithm>
#include <cmath>
#include <string>

#include <fmt/core.h>

namespace coldpin::report {

namespace {

constexpr double left = 12, right = 140, middle = 11;

std::string mark(check::Verdict verdict, double x) {
    switch (verdict) {
        case check::Verdict::pass:
            return fmt::format("<circle class=\"mark pass\" cx=\"{:.1f}\" cy=\"{}\" r=\"4.5\"/>", x, middle);
        case check::Verdict::fail:
            return fmt::format("<path class=\"mark fail\" d=\"M{:.1f},{} l5.5,-9 h-11 z\"/>", x, middle + 5);
        case check::Verdict::undecided:
            break;
    }
    return fmt::format("<path class=\"mark undecided\" d=\"M{:.1f},{} l5.5,5.5 l-5.5,5.5 l-5.5,-5.5 z\"/>", x,
                       middle - 5.5);
}

std::string edge(double x) {
    return fmt::format("<line class=\"edge\" x1=\"{0:.1f}\" x2=\"{0:.1f}\" y1=\"3\" y2=\"19\"/>", x);
}

}  // namespace

std::string band_picture_svg(const check::Judgement& judgement) {
    const auto& requirement = judgement.requirement;
    if (!judgement.figure || requirement.quantity == "polarity" || (!requirement.min && !requirement.max))
        return "";
    const double value = judgement.figure->value, spread = judgement.figure->uncertainty;
    // The limits lie a quarter in from the ends. A one-sided limit has a room of fixed size, so that pictures
    // compare: 30 dB, or three octaves.
    const bool octaves = requirement.unit == "Hz";
    const auto scaled = [&](double v) { return octaves ? std::log2(std::max(v, 1e-3)) : v; };
    double low = requirement.min ? scaled(*requirement.min) : 0.0,
           high = requirement.max ? scaled(*requirement.max) : 0.0;
    if (!requirement.min || !requirement.max)
        (requirement.min ? high : low) =
            requirement.min ? low + (octaves ? 3.0 : 30.0) : high - (octaves ? 3.0 : 30.0);
    const double span = (high - low) * 1.5, start = low - (high - low) * 0.25;
    const auto x = [&](double v) { return left + (right - left) * std::clamp((v - start) / span, 0.0, 1.0); };
    const double bar_left = requirement.min ? x(low) : left - 10,
                 bar_right = requirement.max ? x(high) : right + 10;
    std::string out = "<svg class=\"band\" viewBox=\"0 0 152 22\" aria-hidden=\"true\">";
    out += fmt::format("<rect class=\"room\" x=\"{:.1f}\" y=\"7\" width=\"{:.1f}\" height=\"8\"/>", bar_left,
                       bar_right - bar_left);
    if (requirement.min) out += edge(x(low));
    if (requirement.max) out += edge(x(high));
    out += fmt::format("<line class=\"reach\" x1=\"{:.1f}\" x2=\"{:.1f}\" y1=\"{}\" y2=\"{}\"/>",
                       x(scaled(value - spread)), x(scaled(value + spread)), middle, middle);
    return out + mark(judgement.verdict, x(scaled(value))) + "</svg>";
}

std::string band_picture_text(const check::Judgement& judgement) {
    const auto& requirement = judgement.requirement;
    if (!judgement.figure || !requirement.min || !requirement.max || requirement.quantity == "polarity")
        return "";
    constexpr int cells = 11;
    const double span = *requirement.max - *requirement.min;
    if (!(span > 0.0)) return "";
    const double place = (judgement.figure->value - *requirement.min) / span * (cells - 1);
    const int at = static_cast<int>(std::lround(std::clamp(place, -1.0, static_cast<double>(cells))));
    std::string picture = at < 0 ? "◂" : "├";
    for (int cell = 0; cell < cells; ++cell) picture += cell == at ? "●" : "─";
    return picture + (at >= cells ? "▸" : "┤");
}

}  // namespace coldpin::report
