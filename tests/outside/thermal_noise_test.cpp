// Thermal noise against the Johnson-Nyquist formula with the exact k of the SI (SI Brochure, 9th edition), as
// published figures state it: 150 ohm at 20 degC over 20 kHz: 0.220 uV, -130.9 dBu (common
// practice). And a fact of the trade: a dynamic microphone gives a few hundred microvolts for speech, which
// 60 to 70 dB bring to line level.
#include <gtest/gtest.h>

#include "coldpin/units/level.h"
#include "coldpin/units/physics.h"

namespace coldpin::units {
namespace {

struct Row {
    double kelvin, ohms, nanovolts_per_root_hz, nanovolts, dbu;
};
const Row table[] = {{290.0, 150, 1.5499, 219.09, -130.97},  {290.0, 200, 1.7897, 252.98, -129.72},
                     {290.0, 1000, 4.0019, 565.68, -122.73}, {293.15, 150, 1.5583, 220.27, -130.92},
                     {293.15, 200, 1.7994, 254.35, -129.67}, {300.0, 10000, 12.8716, 1819.41, -112.58}};

TEST(ThermalNoiseOutsideTest, ResistorsAreAsNoisyAsTheFormulaSays) {
    for (const Row& row : table) {
        EXPECT_NEAR(thermal_noise_density_v(row.ohms, row.kelvin) * 1e9, row.nanovolts_per_root_hz, 0.00006);
        EXPECT_NEAR(thermal_noise_volts(row.ohms, row.kelvin, 19980.0) * 1e9, row.nanovolts, 0.006);
        EXPECT_NEAR(dbu_from_volts_rms(thermal_noise_volts(row.ohms, row.kelvin, 19980.0)), row.dbu, 0.0051);
    }
}

// IEC 60268 / AES usage: 0 dBu is 1 mW in 600 ohm; values of any handbook of levels.
TEST(ThermalNoiseOutsideTest, LevelsAreTheHandbooks) {
    EXPECT_NEAR(volts_rms_from_dbu(0.0), std::sqrt(0.001 * 600.0), 1e-12);
    EXPECT_NEAR(volts_rms_from_dbu(4.0), 1.22765, 0.000005);
    EXPECT_NEAR(volts_rms_from_dbu(20.0), 7.74597, 0.000005);
    EXPECT_NEAR(volts_rms_from_dbu(24.0), 12.27653, 0.000005);
    EXPECT_NEAR(dbu_from_volts_rms(1.0), 2.2185, 0.00005);
    EXPECT_NEAR(dbu_from_dbv(-10.0), -7.7815, 0.00005);
}

TEST(ThermalNoiseOutsideTest, ADynamicMicrophoneNeedsSixtyToSeventyDecibels) {
    for (double microvolts : {300.0, 800.0}) {
        const double gain_db = 4.0 - dbu_from_volts_rms(microvolts * 1e-6);
        EXPECT_GT(gain_db, 60.0);
        EXPECT_LT(gain_db, 75.0);
    }
}

}  // namespace
}  // namespace coldpin::units
