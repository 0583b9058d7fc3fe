#include "simulated_reader.h"

#include <utility>

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
    interface.reference_full_scale_dbu = table.number("reference_full_scale_dbu", {-60.0, 40.0});
    take(table, "input_noise_dbfs", interface.input_noise_dbfs, {-200.0, 0.0});
    take(table, "output_noise_dbfs", interface.output_noise_dbfs, {-200.0, 0.0});
    take(table, "latency_frames", interface.latency_frames, {0.0, 20000.0});
    take(table, "ac_corner_hz", interface.ac_corner_hz, {0.001, 100.0});
    take(table, "second_harmonic_db", interface.second_harmonic_db, {-200.0, -20.0});
    take(table, "third_harmonic_db", interface.third_harmonic_db, {-200.0, -20.0});
    take(table, "leakage_db", interface.leakage_db, {-300.0, 0.0});
    take(table, "own_hum_dbfs", interface.own_hum_dbfs, {-300.0, 0.0});
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
    faults.lost_frames = table.whole("lost_frames", 1, 100000).value_or(faults.lost_frames);
    faults.resample_to_hz = table.number("resample_to_hz", {4000.0, 768000.0});
    faults.resampler_half_width =
        table.whole("resampler_half_width", 2, 256).value_or(faults.resampler_half_width);
    faults.limiter_dbfs = table.number("limiter_dbfs", {-120.0, 0.0});
    take(table, "limiter_ratio", faults.limiter_ratio, {1.0, 1000.0});
    take(table, "limiter_attack_s", faults.limiter_attack_s, {1e-5, 10.0});
    take(table, "limiter_release_s", faults.limiter_release_s, {1e-5, 10.0});
    take(table, "bass_boost_db", faults.bass_boost_db, {-40.0, 40.0});
    take(table, "monitor_mix", faults.monitor_mix, {0.0, 0.9});
    take(table, "monitor_delay_frames", faults.monitor_delay_frames, {0.0, 20000.0});
    faults.dead_output = table.whole("dead_output", 1, 128);
    faults.dead_input = table.whole("dead_input", 1, 128);
    take(table, "output_moved_db", faults.output_moved_db, {-100.0, 100.0});
    take(table, "clock_ppm", faults.clock_ppm, {-1000.0, 1000.0});
    take(table, "clock_drift_ppm_per_s", faults.clock_drift_ppm_per_s, {-1000.0, 1000.0});
    take(table, "fixture_hum_dbu", faults.fixture_hum_dbu, {-300.0, 20.0});
    take(table, "pad_error_db", faults.pad_error_db, {-100.0, 100.0});
    take(table, "gain_error_db", faults.gain_error_db, {-100.0, 100.0});
    for (const auto& [key, member] : {std::pair{"mono_outputs", &rig::SimulatedFaults::mono_outputs},
                                      {"mono_inputs", &rig::SimulatedFaults::mono_inputs},
                                      {"outputs_swapped", &rig::SimulatedFaults::outputs_swapped},
                                      {"inputs_swapped", &rig::SimulatedFaults::inputs_swapped},
                                      {"unplugged", &rig::SimulatedFaults::unplugged},
                                      {"unit_off", &rig::SimulatedFaults::unit_off},
                                      {"feed_not_reaching", &rig::SimulatedFaults::feed_not_reaching},
                                      {"output_not_connected", &rig::SimulatedFaults::output_not_connected},
                                      {"output_in_reference", &rig::SimulatedFaults::output_in_reference},
                                      {"common_mode_dead", &rig::SimulatedFaults::common_mode_dead},
                                      {"cold_leg_open", &rig::SimulatedFaults::cold_leg_open},
                                      {"legs_swapped", &rig::SimulatedFaults::legs_swapped}})
        faults.*member = table.flag(key).value_or(false);
    return faults;
}

}  // namespace coldpin::profile
