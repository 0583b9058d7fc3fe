#include "coldpin/measure/crosstalk.h"

#include <array>
#include <cmath>

#include "coldpin/measure/clipping.h"
#include "coldpin/spectrum/statistics.h"
#include "coldpin/units/error.h"
#include "coldpin/units/level.h"

#include "tone_fit.h"
#include "tone_level.h"

namespace coldpin::measure {

Findings crosstalk(const CrosstalkQuestion& question) {
    if (question.driven.size() != question.quiet.size())
        throw UsageError("crosstalk compares two channels of one recording: they must be of one length");
    require_not_silent(question.driven, "the driven channel");
    require_unclipped(question.driven, "the driven channel");
    require_unclipped(question.quiet, "the channel that is not driven");
    Findings findings;
    findings.kind = "crosstalk";
    const ToneLevel driven =
        tone_level(question.driven, question.rate_hz, question.frequency_hz, findings.cautions);
    const std::array<double, 1> tone_hz = {driven.frequency_hz};
    const auto stretch = question.quiet.subspan(driven.begin, driven.end - driven.begin);
    const ToneFit quiet = fit_tones(stretch, question.rate_hz, tone_hz);
    const double heard = std::abs(quiet.phasors.front()), std = quiet.std.front();
    constexpr double standing_out = 3.0;
    const bool clear = heard > standing_out * std;
    const double amplitude = clear ? heard : heard + 2.0 * std;
    const double statistics_db =
        clear ? spectrum::combine(spectrum::amplitude_uncertainty_db(std / heard),
                                  spectrum::amplitude_uncertainty_db(driven.amplitude_std / driven.amplitude))
              : 0.0;
    if (!(amplitude > 0.0)) {
        findings.cautions.push_back(
            "the channel that is not driven holds exact zeros: nothing can be said of it");
        return findings;
    }
    findings.figures.push_back(
        {"crosstalk",
         units::db_from_ratio(amplitude / driven.amplitude) - question.full_scale_difference_db.value_db,
         "dB", spectrum::combine(statistics_db, question.full_scale_difference_db.uncertainty_db), 2.0,
         clear ? Bound::exact : Bound::at_most, Conditions{{"frequency_hz", question.frequency_hz}}});
    return findings;
}

}  // namespace coldpin::measure
