// A rig, described: interface, wiring, fixture, limits, calibration; and, for the simulated back end, the
// truth about the pretended interface and preamp. Plain data: rig files are read by the profile room.
//
// Channels count from 1, as on an interface's front. Uncertainties are expanded (k = 2), in dB.
#pragma once

#include <filesystem>
#include <map>
#include <optional>
#include <string>
#include <vector>

namespace coldpin::rig {

enum class BackendKind { portaudio, simulated, stored };

struct AudioSetup {
    BackendKind backend = BackendKind::simulated;
    std::string host_api;       // empty: whichever offers the device
    std::string output_device;  // name, or the part of it that makes it unique
    std::string input_device;   // empty: the same device
    double sample_rate_hz = 48000.0;
    unsigned frames_per_buffer = 0;  // 0: what the driver likes best
};

struct Routing {
    int differential_output = 1;
    std::optional<int> common_mode_output;  // none: one plug is moved between pad and feed
    std::vector<int> device_inputs = {1};   // one per channel of the unit that is wired at once
    std::optional<int> reference_input;     // hears what is sent, if wired
};

struct Fixture {
    std::string name = "direct";
    double differential_loss_db = 0.0;  // output full scale to the preamp's input, loaded
    double differential_loss_uncertainty_db = 0.0;
    double common_mode_loss_db = 0.0;  // output to common-mode voltage at the preamp's input
    double common_mode_loss_uncertainty_db = 0.0;
    double source_ohms = 150.0;                // what the preamp's input sees between its legs
    std::optional<double> rejection_limit_db;  // the best rejection that the fixture's own balance can prove
};

// What must never be exceeded, whatever a plan asks.
struct Limits {
    std::optional<double> max_preamp_input_dbu;
    std::optional<double> max_preamp_common_mode_dbu;
    std::optional<double> max_preamp_output_dbu;
};

struct Calibration {
    double output_full_scale_dbu = 0.0;
    double output_uncertainty_db = 0.0;
    std::optional<double> common_mode_output_full_scale_dbu;  // absent: as the differential output's
    double input_full_scale_dbu = 0.0;
    double input_uncertainty_db = 0.0;
    std::optional<double> reference_full_scale_dbu;
    std::string time_utc;  // ISO 8601
    std::string remark;    // who, and whatever else
    std::string knobs{};   // where the interface's controls stood, in the user's words
    std::string meter{};   // which meter, its range and accuracy

    // What the loop from output to input was like then; absent where it was not measured.
    std::optional<double> loop_latency_frames{};
    std::optional<double> loop_noise_dbfs{};     // RMS, 20 Hz to 20 kHz, input on the silent output
    std::optional<double> loop_distortion_db{};  // harmonics 2 to 5 of 997 Hz at -3 dBFS, re the fundamental
    std::optional<double> loop_deviation_db{};   // largest from flat, 20 Hz to 20 kHz
    std::optional<double> loop_crosstalk_db{};   // of the other inputs, worst
    std::optional<double> loop_dc{};             // of the device's input, full scale = 1
};

// The pretended interface.
struct SimulatedInterface {
    double output_full_scale_dbu = 18.0;
    double input_full_scale_dbu = 18.0;
    std::optional<double> reference_full_scale_dbu = {};  // absent: as the calibration says
    double input_noise_dbfs = -104.0;                     // RMS, 20 Hz to 20 kHz
    double output_noise_dbfs = -106.0;                    // RMS, 20 Hz to 20 kHz, while playing or idle
    double latency_frames = 391.37;                       // round trip, fractional
    double ac_corner_hz = 1.0;                            // of output and input together, first order
    double second_harmonic_db = -104.0;                   // at full scale, of the loop
    double third_harmonic_db = -108.0;
    double leakage_db = -112.0;  // output to input inside the interface, flat
    double ground_loop_hum_dbfs =
        -112.0;                    // fundamental's RMS at the input, through its loop when a unit is there
    double own_hum_dbfs = -300.0;  // ... of the interface alone
    double mains_hz = 50.013;
    double mains_drift_hz_per_s = 0.0005;
};

// The pretended preamp. Levels at its input are differential dBu.
struct SimulatedPreamp {
    std::string name = "simulated preamp";
    std::map<std::string, double> gain_db_by_setting = {{"", 40.0}};
    double lower_corner_hz = 6.0;      // first order
    double upper_corner_hz = 65000.0;  // first order
    double input_noise_nv = 1.6;       // nV/sqrt(Hz), voltage
    double input_noise_pa = 1.0;       // pA/sqrt(Hz), current, into source_ohms
    double flicker_corner_hz = 60.0;
    double hum_input_dbu = -128.0;        // fundamental picked up, referred to the input
    double hum_harmonic_slope_db = -8.0;  // per odd harmonic after the first; even ones 12 dB lower
    double rejection_db = 86.0;           // at low frequencies
    double rejection_corner_hz = 3000.0;  // falls 6 dB an octave above
    double max_output_dbu = 22.0;         // clips softly just below, hard at
    double second_harmonic_db = -98.0;    // at +4 dBu out
    double third_harmonic_db = -106.0;
    int polarity = 1;
    // A second channel of the unit that differs from the first: added to every gain.
    double second_channel_gain_offset_db = 0.03;
};

// What goes wrong in the pretended path and at the pretended bench, to be found by content alone.
struct SimulatedFaults {
    std::vector<int> lose_frames_in_takes;    // numbers (from 1) of takes that lose frames in mid-stimulus
    int lost_frames = 7;                      // so many
    std::vector<int> repeat_frames_in_takes;  // that repeat 32 frames
    std::vector<int> zero_frames_in_takes;    // that hold 40 frames of exact zeros

    // The operating system and the interface's own mixer.
    std::optional<double> resample_to_hz;  // the path really runs at this rate
    int resampler_half_width = 16;         // zero crossings of its sinc: few make images
    std::optional<double> limiter_dbfs;    // of the inputs: from here on
    double limiter_ratio = 3.0;
    double limiter_attack_s = 0.005;
    double limiter_release_s = 0.1;
    double bass_boost_db = 0.0;  // an "enhancement": shelf below 200 Hz
    double monitor_mix = 0.0;    // share of the device's input heard in the outputs
    double monitor_delay_frames = 64.0;
    bool mono_outputs = false;
    bool mono_inputs = false;
    bool outputs_swapped = false;
    bool inputs_swapped = false;
    std::optional<int> dead_output;
    std::optional<int> dead_input;
    double output_moved_db = 0.0;  // the output's knob stands so much higher than the interface's figures say
    double clock_ppm = 0.0;        // the input's clock is faster by so much
    double clock_drift_ppm_per_s = 0.0;

    // The bench.
    double fixture_hum_dbu = -300.0;  // picked up by fixture and generator, at the preamp's input
    bool unplugged = false;           // exact zeros everywhere
    bool unit_off = false;
    bool feed_not_reaching = false;  // nothing arrives at the preamp's input
    bool output_not_connected = false;
    bool output_in_reference = false;  // the unit's output plug sits in the reference input
    bool common_mode_dead = false;
    bool cold_leg_open = false;
    bool legs_swapped = false;
    double pad_error_db = 0.0;   // the pad loses that much more than the rig file says
    double gain_error_db = 0.0;  // the gain control stands so much higher
};

struct SimulatedSetup {
    SimulatedInterface interface;
    std::optional<SimulatedPreamp> preamp;  // absent: the device profile's pretended unit, else the default
    SimulatedFaults faults;
    unsigned long seed = 1;
    bool real_time = false;
};

struct Setup {
    std::string name = "simulated";
    AudioSetup audio;
    Routing routing;
    Fixture fixture;
    std::string fixture_key = "head";  // its NAME in [fixtures.NAME]
    Limits limits;
    std::optional<Calibration> calibration;  // absent: nothing in volts can be measured
    SimulatedSetup simulated;
    std::filesystem::path stored_folder;  // of the stored back end
    double temperature_c = 20.0;
};

}  // namespace coldpin::rig
