#include "simulated_reader.h"

namespace coldpin::profile {

namespace {

void take(TableReader& table, std::string_view key, double& member, Range range) {
    if (const auto value = table.number(key, range)) member = *value;
}

}  // namespace

rig::SimulatedPreamp read_simulated_preamp(TableReader& table) {
    rig::SimulatedPreamp preamp;
    if (auto name = table.text("name")) preamp.name = *name;
    if (table.has("gain_db")) preamp.gain_db_by_setting.clear();
    table.entries("gain_db", {-60.0, 120.0}, [&](const std::string& setting, double gain_db) {
        preamp.gain_db_by_setting[setting] = gain_db;
    });
    if (preamp.gain_db_by_setting.empty())
        table.fail("gain_db", "no gain", "one for each setting, such as { \"40 dB\" = 40.0 }");
    take(table, "lower_corner_hz", preamp.lower_corner_hz, {0.01, 1000.0});
    take(table, "upper_corner_hz", preamp.upper_corner_hz, {1000.0, 1e7});
    take(table, "input_noise_nv", preamp.input_noise_nv, {0.0, 1e6});
    take(table, "input_noise_pa", preamp.input_noise_pa, {0.0, 1e6});
    take(table, "flicker_corner_hz", preamp.flicker_corner_hz, {0.0, 20000.0});
    take(table, "hum_input_dbu", preamp.hum_input_dbu, {-300.0, 20.0});
    take(table, "hum_harmonic_slope_db", preamp.hum_harmonic_slope_db, {-100.0, 0.0});
    take(table, "rejection_db", preamp.rejection_db, {0.0, 200.0});
    take(table, "rejection_corner_hz", preamp.rejection_corner_hz, {1.0, 1e7});
    take(table, "max_output_dbu", preamp.max_output_dbu, {-60.0, 60.0});
    take(table, "second_harmonic_db", preamp.second_harmonic_db, {-200.0, 0.0});
    take(table, "third_harmonic_db", preamp.third_harmonic_db, {-200.0, 0.0});
    if (const auto polarity = table.whole("polarity", -1, 1)) {
        if (*polarity == 0) table.fail("polarity", "0", "1 (upright) or -1 (inverted)");
        preamp.polarity = *polarity;
    }
    take(table, "second_channel_gain_offset_db", preamp.second_channel_gain_offset_db, {-20.0, 20.0});
    return preamp;
}

rig::SimulatedInterface read_simulated_interface(TableReader& table) {
    rig::SimulatedInterface interface;
    take(table, "output_full_scale_dbu", interface.output_full_scale_dbu, {-40.0, 40.0});
    take(table, "input_full_scale_dbu", interface.input_full_scale_dbu, {-60.0, 40.0});
    take(table, "input_noise_dbfs", interface.input_noise_dbfs, {-200.0, 0.0});
    take(table, "output_noise_dbfs", interface.output_noise_dbfs, {-200.0, 0.0});
    take(table, "latency_frames", interface.latency_frames, {0.0, 20000.0});
    take(table, "ac_corner_hz", interface.ac_corner_hz, {0.001, 100.0});
    take(table, "second_harmonic_db", interface.second_harmonic_db, {-200.0, -20.0});
    take(table, "third_harmonic_db", interface.third_harmonic_db, {-200.0, -20.0});
    take(table, "leakage_db", interface.leakage_db, {-300.0, 0.0});
    take(table, "ground_loop_hum_dbfs", interface.ground_loop_hum_dbfs, {-300.0, 0.0});
    take(table, "mains_hz", interface.mains_hz, {10.0, 500.0});
    take(table, "mains_drift_hz_per_s", interface.mains_drift_hz_per_s, {-1.0, 1.0});
    return interface;
}

rig::SimulatedFaults read_simulated_faults(TableReader& table) {
    rig::SimulatedFaults faults;
    faults.lose_frames_in_takes = table.whole_numbers("lose_frames_in_takes", 1, 1000000);
    faults.repeat_frames_in_takes = table.whole_numbers("repeat_frames_in_takes", 1, 1000000);
    faults.zero_frames_in_takes = table.whole_numbers("zero_frames_in_takes", 1, 1000000);
    faults.unplugged = table.flag("unplugged").value_or(false);
    faults.cold_leg_open = table.flag("cold_leg_open").value_or(false);
    faults.legs_swapped = table.flag("legs_swapped").value_or(false);
    return faults;
}

}  // namespace coldpin::profile
