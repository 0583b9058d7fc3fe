#include "run_charts.h"

#include <algorithm>

#include "chart.h"
#include "summary.h"

namespace coldpin::report {

namespace {

constexpr std::size_t fewest_for_a_line = 12;  // a few tones are dots: between them nothing was measured

ChartSeries series_of(const measure::Curve& curve, const std::string& name) {
    ChartSeries series;
    series.name = name.empty() ? "measured" : name;
    series.x = curve.x;
    series.y = curve.y;
    series.uncertainty = curve.uncertainty;
    return series;
}

std::vector<profile::MaskPoint> mask_of(const check::Run& run, const std::string& quantity) {
    for (const auto& requirement : run.profile.requirements)
        if (requirement.quantity == quantity && !requirement.mask.empty()) return requirement.mask;
    return {};
}

Chart curve_chart(const check::Run& run, const std::string& quantity, const std::string& title,
                  const std::string& y_label) {
    Chart chart;
    chart.title = title;
    chart.y_label = y_label;
    chart.mask = mask_of(run, quantity);
    for (const auto& step : run.steps)
        if (const measure::Curve* curve = step.findings.curve(quantity))
            if (curve->x.size() >= fewest_for_a_line)
                chart.series.push_back(series_of(*curve, group_name(step.unit_channel, step.setting)));
    return chart;
}

// Rejection: a curve where it was swept, dots where it was measured with tones.
Chart rejection_chart(const check::Run& run) {
    Chart chart = curve_chart(run, "common_mode_rejection", "Common-mode rejection", "dB, more is better");
    for (const auto& step : run.steps) {
        const measure::Curve* curve = step.findings.curve("common_mode_rejection");
        if (step.measure != "cmrr" || (curve != nullptr && curve->x.size() >= fewest_for_a_line)) continue;
        ChartSeries series;
        series.name = group_name(step.unit_channel, step.setting);
        series.dots = true;
        for (const auto& figure : step.findings.figures) {
            const auto* frequency = figure.conditions.find("frequency_hz");
            const double* hz = frequency != nullptr ? std::get_if<double>(frequency) : nullptr;
            if (figure.quantity != "common_mode_rejection" || hz == nullptr) continue;
            series.x.push_back(*hz);
            series.y.push_back(figure.value);
            series.uncertainty.push_back(figure.uncertainty);
            series.at_least.push_back(figure.bound == measure::Bound::at_least);
        }
        if (!series.x.empty()) chart.series.push_back(series);
    }
    chart.least_y_span = 40.0;
    return chart;
}

}  // namespace

std::string run_charts(const check::Run& run) {
    Chart magnitude = curve_chart(run, "magnitude", "Response", "dB re the reference frequency");
    magnitude.x_low_hz = 10.0;
    magnitude.x_high_hz = 24000.0;
    Chart noise = curve_chart(run, "noise_density", "Noise density at the output", "V/√Hz");
    noise.logarithmic_y = true;
    const bool scaled = std::any_of(run.steps.begin(), run.steps.end(), [](const auto& step) {
        const auto* curve = step.findings.curve("noise_density");
        return curve != nullptr && !curve->y_unit.empty() && curve->y_unit.front() == 'V';
    });
    if (!scaled) noise.y_label = "of full scale per √Hz";
    for (auto& series : noise.series) series.uncertainty.clear();  // the line's own roughness shows it
    Chart phase = curve_chart(run, "phase", "Phase, pure delay removed", "degrees");
    phase.least_y_span = 90.0;
    return svg(magnitude) + svg(noise) + svg(rejection_chart(run)) + svg(phase);
}

}  // namespace coldpin::report
