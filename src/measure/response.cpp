#include "coldpin/measure/response.h"

#include <algorithm>
#include <cmath>
#include <numbers>

#include <fmt/core.h>

#include "coldpin/measure/clipping.h"
#include "coldpin/measure/transfer.h"
#include "coldpin/spectrum/statistics.h"
#include "coldpin/units/error.h"
#include "coldpin/units/frequency_grid.h"
#include "coldpin/units/level.h"

#include "delay_model.h"
#include "sent_samples.h"

namespace coldpin::measure {

namespace {

constexpr double two_pi = 2.0 * std::numbers::pi, degrees_per_rad = 180.0 / std::numbers::pi;
constexpr int points_per_octave = 24;
constexpr int harmonics_wanted = 5;
// What the gate and the local fit cost at most at the edges of a stimulus without any noise, measured on
// known responses: 0.003 dB. Half of it counts as a standard deviation.
constexpr double method_std_db = 0.0015;
constexpr double half_power_db = -3.0102999566398120;

struct Reference {
    double frequency_hz = 0.0;
    double level_db = 0.0;
    double std_db = 0.0;
};

double level_db(const TransferPoint& point) {
    return units::db_from_ratio(std::abs(point.value));
}
double std_db(const TransferPoint& point) {
    return units::db_per_relative_amplitude * point.std / std::abs(point.value);
}

Reference reference_of(const Transfer& transfer, double wanted_hz, std::vector<std::string>& cautions) {
    double hz = std::clamp(wanted_hz, transfer.low_hz, transfer.high_hz);
    if (transfer.is_tones())
        hz = *std::min_element(transfer.tones_hz.begin(), transfer.tones_hz.end(), [&](double a, double b) {
            return std::abs(std::log(a / wanted_hz)) < std::abs(std::log(b / wanted_hz));
        });
    if (std::abs(hz - wanted_hz) > 1e-9)
        cautions.push_back(fmt::format(
            "the stimulus does not hold the reference frequency {:g} Hz; levels are relative to {:g} Hz",
            wanted_hz, hz));
    const TransferPoint point = transfer.at(hz);
    if (!(std::abs(point.value) > 4.0 * point.std))
        throw CannotMeasure(fmt::format(
            "at the reference frequency {:g} Hz the response does not stand out of the noise", hz));
    return {hz, level_db(point), std_db(point)};
}

// Frequencies of the curves: those of the tones, or a grid with the round ends and the reference among it.
std::vector<double> curve_grid(const Transfer& transfer, double low_hz, double high_hz, double reference_hz) {
    if (transfer.is_tones()) {
        std::vector<double> grid;
        for (double hz : transfer.tones_hz)
            if (hz >= low_hz && hz <= high_hz) grid.push_back(hz);
        return grid;
    }
    std::vector<double> grid = units::logarithmic_grid(low_hz, high_hz, points_per_octave);
    for (double hz : {20.0, reference_hz, 20000.0})
        if (hz > low_hz && hz < high_hz) grid.push_back(hz);
    std::sort(grid.begin(), grid.end());
    grid.erase(
        std::unique(grid.begin(), grid.end(), [](double a, double b) { return std::abs(a - b) < 1e-9 * a; }),
        grid.end());
    return grid;
}

// Where the level crosses half power between the reference and an end, or nothing.
struct Crossing {
    double frequency_hz = 0.0;
    double std_hz = 0.0;
};
std::optional<Crossing> crossing(const Transfer& transfer, const Reference& reference, double end_hz) {
    const auto depth = [&](double hz) {
        return level_db(transfer.at(hz)) - reference.level_db - half_power_db;
    };
    const bool downwards = end_hz < reference.frequency_hz;
    constexpr double stride = 1.01;
    double inside = reference.frequency_hz;
    while (true) {
        double outside = downwards ? std::max(end_hz, inside / stride) : std::min(end_hz, inside * stride);
        if (outside == inside) return std::nullopt;
        if (depth(outside) < 0.0) {
            for (int i = 0; i < 40; ++i) {
                const double middle = std::sqrt(inside * outside);
                (depth(middle) < 0.0 ? outside : inside) = middle;
            }
            const double slope =
                (depth(inside * 1.002) - depth(inside / 1.002)) / (0.004 * inside);  // dB per Hz
            const double spread = spectrum::combine(std_db(transfer.at(inside)), reference.std_db);
            return Crossing{inside,
                            std::abs(slope) > 0.0 ? std::min(spread / std::abs(slope), inside) : inside};
        }
        inside = outside;
    }
}

void add_corners(Findings& findings, const Transfer& transfer, const Reference& reference) {
    const Conditions conditions = {{"reference_frequency_hz", reference.frequency_hz},
                                   {"level_db", half_power_db}};
    const auto add = [&](const char* quantity, double end_hz, Bound beyond) {
        const auto found = crossing(transfer, reference, end_hz);
        if (found)
            findings.figures.push_back(
                {quantity, found->frequency_hz, "Hz", 2.0 * found->std_hz, 2.0, Bound::exact, conditions});
        else
            findings.figures.push_back({quantity, end_hz, "Hz", 0.0, 2.0, beyond, conditions});
    };
    add("lower_corner", transfer.low_hz, Bound::at_most);
    add("upper_corner", transfer.high_hz, Bound::at_least);
}

void add_harmonics(Findings& findings, const Transfer& transfer, const std::vector<double>& grid) {
    for (int number = 2;
         number <= harmonics_wanted && static_cast<std::size_t>(number) - 2 < transfer.harmonics.size();
         ++number) {
        Curve curve;
        curve.quantity = fmt::format("harmonic_{}", number);
        curve.x_unit = "Hz";
        curve.y_unit = "dB";
        std::size_t drowned = 0;
        for (double hz : grid) {
            if (number * hz > 0.98 * transfer.high_hz || number * hz < 1.05 * transfer.low_hz ||
                hz < transfer.low_hz)
                continue;
            const TransferPoint harmonic = transfer.harmonic_at(number, hz), linear = transfer.at(hz);
            const double size = std::abs(harmonic.value);
            if (!(size > 3.0 * harmonic.std) || !(std::abs(linear.value) > 0.0)) {
                ++drowned;
                continue;
            }
            curve.x.push_back(hz);
            curve.y.push_back(units::db_from_ratio(size / std::abs(linear.value)));
            curve.uncertainty.push_back(spectrum::amplitude_uncertainty_db(harmonic.std / size));
        }
        if (!curve.x.empty())
            findings.curves.push_back(std::move(curve));
        else if (drowned > 0)
            findings.cautions.push_back(
                fmt::format("harmonic {} does not stand out of the noise anywhere", number));
    }
}

void add_curves(Findings& findings, const Transfer& transfer, const Reference& reference,
                const std::vector<double>& grid) {
    const DelayFit delay = fit_delay(transfer);
    const double rest_s = (delay.frames - transfer.delay_frames) / transfer.rate_hz;
    Curve magnitude{
        "magnitude", "Hz", "dB", {}, {}, {}, Conditions{{"reference_frequency_hz", reference.frequency_hz}}};
    Curve phase{"phase", "Hz", "degree", {}, {}, {}, Conditions{{"latency_removed_frames", delay.frames}}};
    Curve group_delay{
        "group_delay", "Hz", "s", {}, {}, {}, Conditions{{"latency_removed_frames", delay.frames}}};
    double unwrapped = 0.0;
    std::size_t drowned = 0;
    for (double hz : grid) {
        const TransferPoint point = transfer.at(hz);
        const double size = std::abs(point.value);
        if (!(size > 2.0 * point.std)) {
            ++drowned;
            continue;
        }
        magnitude.x.push_back(hz);
        magnitude.y.push_back(hz == reference.frequency_hz ? 0.0 : level_db(point) - reference.level_db);
        const double spread = hz == reference.frequency_hz
                                  ? 0.0
                                  : spectrum::combine(spectrum::amplitude_uncertainty_db(point.std / size),
                                                      2.0 * reference.std_db, 2.0 * method_std_db);
        magnitude.uncertainty.push_back(spread);
        const double angle = std::arg(point.value * std::polar(1.0, two_pi * hz * rest_s));
        unwrapped = phase.x.empty() ? angle : unwrapped + std::remainder(angle - unwrapped, two_pi);
        phase.x.push_back(hz);
        phase.y.push_back(unwrapped * degrees_per_rad);
        phase.uncertainty.push_back(2.0 * point.std / size * degrees_per_rad);
        if (!transfer.is_tones()) {
            // -d(phase)/d(omega) from the local fit's own slope.
            const double slope = std::imag(point.slope_per_hz / point.value);
            group_delay.x.push_back(hz);
            group_delay.y.push_back(-slope / two_pi - rest_s);
        }
    }
    if (drowned > 0)
        findings.cautions.push_back(fmt::format(
            "{} of {} points of the response are lost in the noise and left out", drowned, grid.size()));
    findings.curves.push_back(std::move(magnitude));
    findings.curves.push_back(std::move(phase));
    if (!group_delay.x.empty()) findings.curves.push_back(std::move(group_delay));
}

void add_deviation(Findings& findings, const Band& band, const Reference& reference) {
    const Curve& magnitude = *findings.curve("magnitude");
    std::optional<std::size_t> worst;
    for (std::size_t k = 0; k < magnitude.x.size(); ++k) {
        if (magnitude.x[k] < band.low_hz * (1.0 - 1e-9) || magnitude.x[k] > band.high_hz * (1.0 + 1e-9))
            continue;
        if (!worst || std::abs(magnitude.y[k]) > std::abs(magnitude.y[*worst])) worst = k;
    }
    if (!worst) {
        findings.cautions.push_back("the stimulus has nothing in the band: no deviation is given");
        return;
    }
    const double low = std::max(band.low_hz, magnitude.x.front()),
                 high = std::min(band.high_hz, magnitude.x.back());
    findings.figures.push_back({"response_deviation", std::abs(magnitude.y[*worst]), "dB",
                                magnitude.uncertainty[*worst], 2.0, Bound::exact,
                                Conditions{{"frequency_hz", magnitude.x[*worst]},
                                           {"reference_frequency_hz", reference.frequency_hz},
                                           {"band_hz", std::vector<double>{low, high}}}});
    if (low > band.low_hz * 1.001 || high < band.high_hz * 0.999)
        findings.cautions.push_back(
            fmt::format("the stimulus spans only {:g} to {:g} Hz of the band {:g} to {:g} Hz", low, high,
                        band.low_hz, band.high_hz));
}

}  // namespace

Findings response(const ResponseQuestion& question) {
    require_not_silent(question.recording, "the recording");
    require_unclipped(question.recording, "the recording");
    SentSamples sent(question.recording, question.rate_hz, question.stimulus, question.stimulus_samples,
                     question.reference);
    sent.question().highest_harmonic = harmonics_wanted;
    const Transfer measured = transfer(sent.question());
    Findings findings;
    findings.kind = "response";
    const Reference reference = reference_of(measured, question.reference_frequency_hz, findings.cautions);
    add_corners(findings, measured, reference);
    const std::vector<double> grid =
        curve_grid(measured, measured.low_hz, measured.high_hz, reference.frequency_hz);
    add_curves(findings, measured, reference, grid);
    add_deviation(findings, question.band, reference);
    add_harmonics(findings, measured, grid);
    return findings;
}

}  // namespace coldpin::measure
