#include "coldpin/measure/gain.h"

#include <cmath>
#include <numbers>

#include <fmt/core.h>

#include "coldpin/measure/clipping.h"
#include "coldpin/spectrum/sine_fit.h"
#include "coldpin/spectrum/statistics.h"
#include "coldpin/units/error.h"
#include "coldpin/units/level.h"

#include "tone_level.h"

namespace coldpin::measure {

namespace {

double wrapped_degrees(double degrees) {
    const double turned = std::remainder(degrees, 360.0);
    return turned <= -180.0 ? turned + 360.0 : turned;
}

}  // namespace

Findings gain(const GainQuestion& question) {
    if (!question.scale.full_scale_dbu)
        throw UsageError(
            "gain in dB needs volts: say what level a 0 dBFS sine is at the input (--input-full-scale-dbu)");
    require_not_silent(question.recording, "the recording");
    require_unclipped(question.recording, "the recording");
    Findings findings;
    findings.kind = "gain";
    const ToneLevel tone =
        tone_level(question.recording, question.rate_hz, question.frequency_hz, findings.cautions);

    const double level_dbu = question.scale.level_from_sample_rms(tone.amplitude / std::numbers::sqrt2);
    const double statistics_db = spectrum::amplitude_uncertainty_db(tone.amplitude_std / tone.amplitude);
    const double level_uncertainty_db = spectrum::combine(statistics_db, question.scale.uncertainty_db);
    // The frequency asked for names the figure; what two clocks made of it stands beside.
    Conditions conditions = {{"frequency_hz", question.frequency_hz},
                             {"drive_dbu", question.drive_dbu.value_db}};
    if (tone.frequency_hz != question.frequency_hz) conditions.set("fitted_frequency_hz", tone.frequency_hz);
    findings.figures.push_back({"gain", level_dbu - question.drive_dbu.value_db, "dB",
                                spectrum::combine(level_uncertainty_db, question.drive_dbu.uncertainty_db),
                                2.0, Bound::exact, conditions});
    findings.figures.push_back(
        {"output_level", level_dbu, "dBu", level_uncertainty_db, 2.0, Bound::exact, conditions});

    if (tone.harmonics_ratio > 0.01)
        findings.cautions.push_back(fmt::format(
            "the tone is distorted: its harmonics are {:.2g} % of it; something is overloaded, or the unit's "
            "gain depends on the level",
            100.0 * tone.harmonics_ratio));

    if (!question.reference.empty()) {
        if (question.reference.size() != question.recording.size())
            throw UsageError("the reference channel must be as long as the recording");
        require_unclipped(question.reference, "the reference channel");
        const auto sent = question.reference.subspan(tone.begin, tone.end - tone.begin);
        const auto fit = spectrum::fit_sine(sent, question.rate_hz, tone.frequency_hz);
        if (!(std::abs(fit.phasor) > 8.0 * fit.amplitude_std) || std::abs(fit.phasor) < 1e-7)
            throw CannotMeasure(
                fmt::format("the reference channel holds no tone at {:g} Hz: is it wired to what is sent?",
                            tone.frequency_hz));
        const double degrees = std::arg(tone.phasor / fit.phasor) * 180.0 / std::numbers::pi;
        const double spread =
            spectrum::combine(tone.amplitude_std / tone.amplitude, fit.amplitude_std / std::abs(fit.phasor));
        findings.figures.push_back({"phase", wrapped_degrees(degrees), "degree",
                                    2.0 * spread * 180.0 / std::numbers::pi, 2.0, Bound::exact,
                                    Conditions{{"frequency_hz", question.frequency_hz}}});
    }
    return findings;
}

}  // namespace coldpin::measure
