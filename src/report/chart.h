// Curves over frequency as inline SVG whose colours follow the page's light or dark scheme.
//
// Written directly rather than through a drawing library: as text in the page it stays selectable, small, and
// takes its colours from the style sheet, which a rendered picture cannot.
#pragma once

#include <optional>
#include <string>
#include <vector>

#include "coldpin/measure/figure.h"
#include "coldpin/profile/device_profile.h"

namespace coldpin::report {

struct ChartSeries {
    std::string name;
    std::vector<double> x;  // Hz
    std::vector<double> y;
    std::vector<double> uncertainty;  // empty or as long as y: drawn as a band, or whiskers for dots
    std::vector<bool> at_least;       // dots only: drawn as an arrow upwards
    bool dots = false;
};

struct Chart {
    std::string title;
    std::string y_label;
    std::vector<ChartSeries> series;
    std::vector<profile::MaskPoint> mask;
    double x_low_hz = 20.0;
    double x_high_hz = 20000.0;
    double least_y_span = 6.0;  // so that a flat line is not drawn as a mountain range
    bool logarithmic_y = false;
};

// Empty when there is nothing to draw.
std::string svg(const Chart& chart);

std::string escaped(const std::string& text);  // for HTML and SVG

}  // namespace coldpin::report
