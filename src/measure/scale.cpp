#include "coldpin/measure/scale.h"

#include "coldpin/units/level.h"

namespace coldpin::measure {

double LevelScale::level_from_sample_rms(double sample_rms) const noexcept {
    return units::dbfs_from_sample_rms(sample_rms) + full_scale_dbu.value_or(0.0);
}

double LevelScale::volts_per_sample_unit() const noexcept {
    // A sine of peak 1.0 has the full-scale level; its RMS in samples is 0.7071.
    return full_scale_dbu ? units::volts_rms_from_dbu(*full_scale_dbu) / units::sample_rms_at_0_dbfs : 1.0;
}

}  // namespace coldpin::measure
