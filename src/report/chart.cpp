#include "chart.h"

#include <algorithm>
#include <cmath>
#include <iterator>
#include <limits>

#include <fmt/core.h>

namespace coldpin::report {

namespace {

constexpr double width = 720, height = 300, left = 62, right = 16, top = 14, bottom = 40;

struct Axes {
    double x_low, x_high, y_low, y_high;
    bool logarithmic_y;
    double x(double hz) const {
        return left + (width - left - right) * std::log(hz / x_low) / std::log(x_high / x_low);
    }
    double y(double value) const {
        const double at = logarithmic_y ? std::log(value / y_low) / std::log(y_high / y_low)
                                        : (value - y_low) / (y_high - y_low);
        return height - bottom - (height - top - bottom) * std::clamp(at, -0.02, 1.02);
    }
};

double nice_step(double span, int wanted) {
    const double raw = span / wanted;
    const double decade = std::pow(10.0, std::floor(std::log10(raw)));
    for (double factor : {1.0, 2.0, 5.0})
        if (raw <= factor * decade) return factor * decade;
    return 10.0 * decade;
}

bool inside(const Chart& chart, double hz) {
    return hz >= chart.x_low_hz * 0.999 && hz <= chart.x_high_hz * 1.001;
}

Axes axes_for(const Chart& chart) {
    double low = std::numeric_limits<double>::max(), high = std::numeric_limits<double>::lowest();
    const auto take = [&](double value) {
        low = std::min(low, value);
        high = std::max(high, value);
    };
    for (const auto& series : chart.series)
        for (std::size_t i = 0; i < series.x.size(); ++i)
            if (inside(chart, series.x[i]) && (!chart.logarithmic_y || series.y[i] > 0.0)) take(series.y[i]);
    for (const auto& point : chart.mask) {
        if (!inside(chart, point.frequency_hz)) continue;
        if (point.min) take(*point.min);
        if (point.max) take(*point.max);
    }
    if (chart.logarithmic_y) {
        low = std::pow(10.0, std::floor(std::log10(low)));
        high = std::pow(10.0, std::ceil(std::log10(high)));
        if (high <= low) high = low * 10.0;
    } else {
        const double missing = std::max(0.0, chart.least_y_span - (high - low)) / 2.0;
        const double step = nice_step(high - low + 2.0 * missing, 6);
        low = std::floor((low - missing) / step) * step;
        high = std::ceil((high + missing) / step) * step;
    }
    return {chart.x_low_hz, chart.x_high_hz, low, high, chart.logarithmic_y};
}

std::string tick_text(double value) {
    if (value != 0.0 && (std::abs(value) < 1e-3 || std::abs(value) >= 1e5))
        return fmt::format("{:.0e}", value);
    return fmt::format("{:g}", std::round(value * 1e6) / 1e6);
}

std::string density_text(double volts) {
    if (volts < 1e-6) return fmt::format("{:g} nV", volts * 1e9);
    if (volts < 1e-3) return fmt::format("{:g} µV", volts * 1e6);
    return fmt::format("{:g} mV", volts * 1e3);
}

void add_grid(std::string& out, const Chart& chart, const Axes& axes) {
    const auto y_line = [&](double value, const std::string& text) {
        out += fmt::format(
            "<line class=\"grid\" x1=\"{:.1f}\" x2=\"{:.1f}\" y1=\"{:.1f}\" y2=\"{:.1f}\"/>"
            "<text class=\"tick\" x=\"{:.1f}\" y=\"{:.1f}\" text-anchor=\"end\">{}</text>\n",
            left, width - right, axes.y(value), axes.y(value), left - 7, axes.y(value) + 4, escaped(text));
    };
    if (chart.logarithmic_y) {
        const int decades = static_cast<int>(std::lround(std::log10(axes.y_high / axes.y_low)));
        for (int i = 0; i <= decades; ++i) {
            const double value = axes.y_low * std::pow(10.0, i);
            y_line(value, chart.y_label.front() == 'V' ? density_text(value) : tick_text(value));
        }
    } else {
        const double step = nice_step(axes.y_high - axes.y_low, 6);
        const int ticks = static_cast<int>(std::lround((axes.y_high - axes.y_low) / step));
        for (int i = 0; i <= ticks; ++i) y_line(axes.y_low + i * step, tick_text(axes.y_low + i * step));
    }
    for (const double decade : {1.0, 10.0, 100.0, 1000.0, 10000.0, 100000.0}) {
        for (int digit = 1; digit <= 9; ++digit) {
            const double hz = decade * digit;
            if (!inside(chart, hz)) continue;
            const bool labelled = digit == 1 || digit == 2 || digit == 5;
            out += fmt::format(
                "<line class=\"grid{}\" x1=\"{:.1f}\" x2=\"{:.1f}\" y1=\"{:.1f}\" y2=\"{:.1f}\"/>\n",
                labelled ? "" : " thin", axes.x(hz), axes.x(hz), top, height - bottom);
            if (labelled)
                out += fmt::format(
                    "<text class=\"tick\" x=\"{:.1f}\" y=\"{:.1f}\" text-anchor=\"middle\">{}</text>\n",
                    axes.x(hz), height - bottom + 17,
                    hz >= 1000.0 ? fmt::format("{:g}k", hz / 1000.0) : fmt::format("{:g}", hz));
        }
    }
    out += fmt::format(
        "<text class=\"axis\" x=\"{:.1f}\" y=\"{:.1f}\" text-anchor=\"end\">frequency, Hz</text>\n",
        width - right, height - 6);
}

// The forbidden side of a mask is shaded; straight lines in between over log f.
void add_mask(std::string& out, const Chart& chart, const Axes& axes) {
    for (const bool upper : {false, true}) {
        std::string edge;
        double first = 0.0, last = 0.0;
        for (const auto& point : chart.mask) {
            const auto& limit = upper ? point.max : point.min;
            if (!limit) continue;
            const double x = std::clamp(axes.x(point.frequency_hz), left, width - right);
            if (edge.empty()) first = x;
            last = x;
            edge += fmt::format("{:.1f},{:.1f} ", x, axes.y(*limit));
        }
        if (edge.empty()) continue;
        const double wall = upper ? top : height - bottom;
        out += fmt::format(
            "<polygon class=\"forbidden\" points=\"{}{:.1f},{:.1f} {:.1f},{:.1f}\"/>"
            "<polyline class=\"limit\" points=\"{}\"/>\n",
            edge, last, wall, first, wall, edge);
    }
}

// At most one point a pixel and a half: a noise density has tens of thousands, of which the mean is drawn.
struct Points {
    std::vector<double> x, y, u;
};
Points thinned(const Chart& chart, const ChartSeries& series, const Axes& axes) {
    Points points;
    double column = -1e9, sum_y = 0.0, sum_u = 0.0, sum_x = 0.0;
    int count = 0;
    const auto flush = [&] {
        if (count == 0) return;
        points.x.push_back(sum_x / count);
        points.y.push_back(sum_y / count);
        points.u.push_back(sum_u / count);
        count = 0;
        sum_x = sum_y = sum_u = 0.0;
    };
    for (std::size_t i = 0; i < series.x.size(); ++i) {
        if (series.x[i] <= 0.0 || !inside(chart, series.x[i]) || (chart.logarithmic_y && series.y[i] <= 0.0))
            continue;
        const double x = axes.x(series.x[i]);
        if (x - column > 1.5) {
            flush();
            column = x;
        }
        sum_x += x;
        sum_y += series.y[i];
        sum_u += series.uncertainty.empty() ? 0.0 : series.uncertainty[i];
        ++count;
    }
    flush();
    return points;
}

void add_line(std::string& out, const Chart& chart, const ChartSeries& series, const Axes& axes,
              std::size_t index) {
    const Points points = thinned(chart, series, axes);
    if (points.x.empty()) return;
    std::string line, upper, lower;
    for (std::size_t i = 0; i < points.x.size(); ++i)
        line += fmt::format("{:.1f},{:.1f} ", points.x[i], axes.y(points.y[i]));
    if (!series.uncertainty.empty()) {
        for (std::size_t i = 0; i < points.x.size(); ++i) {
            upper += fmt::format("{:.1f},{:.1f} ", points.x[i], axes.y(points.y[i] + points.u[i]));
            const std::size_t back = points.x.size() - 1 - i;
            const double below = points.y[back] - points.u[back];
            lower += fmt::format("{:.1f},{:.1f} ", points.x[back],
                                 axes.y(chart.logarithmic_y ? std::max(below, axes.y_low) : below));
        }
        out += fmt::format("<polygon class=\"spread s{}\" points=\"{}{}\"/>\n", index, upper, lower);
    }
    out += fmt::format("<polyline class=\"curve s{}\" points=\"{}\"/>\n", index, line);
}

void add_dots(std::string& out, const Chart& chart, const ChartSeries& series, const Axes& axes,
              std::size_t index) {
    for (std::size_t i = 0; i < series.x.size(); ++i) {
        if (!inside(chart, series.x[i])) continue;
        const double x = axes.x(series.x[i]), y = axes.y(series.y[i]);
        const bool bound = i < series.at_least.size() && series.at_least[i];
        if (bound) {
            out += fmt::format("<path class=\"bound s{}\" d=\"M{:.1f},{:.1f} v-16 m-5,6 l5,-6 l5,6\"/>\n",
                               index, x, y);
        } else if (i < series.uncertainty.size()) {
            out += fmt::format(
                "<line class=\"whisker s{}\" x1=\"{:.1f}\" x2=\"{:.1f}\" y1=\"{:.1f}\" y2=\"{:.1f}\"/>\n",
                index, x, x, axes.y(series.y[i] - series.uncertainty[i]),
                axes.y(series.y[i] + series.uncertainty[i]));
        }
        out +=
            fmt::format("<circle class=\"dot s{}\" cx=\"{:.1f}\" cy=\"{:.1f}\" r=\"3.5\"/>\n", index, x, y);
    }
}

}  // namespace

std::string escaped(const std::string& text) {
    std::string out;
    for (char c : text) {
        switch (c) {
            case '&':
                out += "&amp;";
                break;
            case '<':
                out += "&lt;";
                break;
            case '>':
                out += "&gt;";
                break;
            case '"':
                out += "&quot;";
                break;
            case '\'':
                out += "&#39;";
                break;
            default:
                out += c;
        }
    }
    return out;
}

std::string svg(const Chart& chart) {
    const bool empty = std::none_of(chart.series.begin(), chart.series.end(), [&](const ChartSeries& series) {
        return std::any_of(series.x.begin(), series.x.end(), [&](double hz) { return inside(chart, hz); });
    });
    if (empty) return "";
    const Axes axes = axes_for(chart);
    std::string out = fmt::format(
        "<figure class=\"chart\"><figcaption>{} <span>{}</span></figcaption>\n"
        "<svg viewBox=\"0 0 {:.0f} {:.0f}\" role=\"img\" aria-label=\"{}\">\n",
        escaped(chart.title), escaped(chart.y_label), width, height, escaped(chart.title));
    add_grid(out, chart, axes);
    add_mask(out, chart, axes);
    for (std::size_t i = 0; i < chart.series.size(); ++i) {
        if (chart.series[i].dots)
            add_dots(out, chart, chart.series[i], axes, i % 6);
        else
            add_line(out, chart, chart.series[i], axes, i % 6);
    }
    out += "</svg>\n";
    if (chart.series.size() > 1) {
        out += "<ul class=\"key\">";
        for (std::size_t i = 0; i < chart.series.size(); ++i)
            out += fmt::format("<li class=\"s{}\">{}</li>", i % 6, escaped(chart.series[i].name));
        out += "</ul>\n";
    }
    return out + "</figure>\n";
}

}  // namespace coldpin::report
