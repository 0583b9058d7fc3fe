// Makes the stored recordings beside it, with their descriptions and truth.json: what is truly in them, from
// the formulas that made them. Run it only to add to them; stored files must not change, or they would no
// longer tell whether the figures did.
//   tests_make_recordings FOLDER
#include <fstream>
#include <string>

#include <nlohmann/json.hpp>

#include "coldpin/signal/description.h"
#include "coldpin/signal/wav.h"
#include "coldpin/units/level.h"

#include "kit/signals.h"

using namespace coldpin;

namespace {

constexpr double rate = 48000.0;

signal::Description described(const std::string& feed) {
    signal::Description description;
    description.feed = feed;
    description.device_channel = 1;
    description.input_full_scale_dbu = 18.0;
    description.source_ohms = 150.0;
    description.temperature_c = 21.0;
    return description;
}

signal::Stimulus played(signal::StimulusKind kind, double length_s, double level_dbfs) {
    signal::Stimulus stimulus;
    stimulus.kind = std::move(kind);
    stimulus.length_s = length_s;
    stimulus.level_dbfs = level_dbfs;
    return stimulus;
}

// Sent after 0.1 s of silence through a device, with hiss and hum.
std::vector<double> heard(const signal::Stimulus& stimulus, const tests::Device& device, unsigned seed) {
    std::vector<double> sent(4800, 0.0);
    const auto body = signal::render(stimulus);
    sent.insert(sent.end(), body.begin(), body.end());
    auto x = tests::through(sent, device, rate, sent.size() + 6000);
    tests::add(x, tests::white_noise(x.size(), units::sample_rms_from_dbfs(-84.0), seed));
    tests::add(x, tests::hum(x.size(), rate, 50.02, 0.0, {1.5e-4, 0.0, 4e-5}));
    return x;
}

void store(const std::string& folder, const std::string& name, const std::vector<double>& x,
           const signal::Description& description) {
    signal::write_wav(folder + "/" + name + ".wav", {rate, {x}});
    signal::write_description(folder + "/" + name + ".wav", description);
}

}  // namespace

int main(int count, char** words) {
    if (count != 2) return 2;
    const std::string folder = words[1];
    nlohmann::ordered_json truth;
    tests::Device device;
    device.gain = 0.4;
    device.high_pass_hz = 31.0;
    device.low_pass_hz = 15500.0;
    device.delay_frames = 417.63;

    // A tone at -20 dBFS of the output; the drive is what the output's volts make behind the pad.
    const auto tone = played(signal::Tone{997.0}, 0.8, -20.0);
    auto description = described("differential");
    description.stimulus = tone;
    description.drive_dbu = -42.0;
    store(folder, "tone", heard(tone, device, 1), description);
    const double tone_gain = std::abs(device.response(997.0));
    truth["tone"]["gain"] = 18.0 - 20.0 + units::db_from_ratio(tone_gain) + 42.0;

    const auto sweep = played(signal::Sweep{10.0, 22000.0}, 1.5, -12.0);
    description = described("differential");
    description.stimulus = sweep;
    store(folder, "sweep", heard(sweep, device, 2), description);
    truth["sweep"]["latency"] = 4800.0 + device.delay_frames;
    truth["sweep"]["polarity"] = 1.0;
    for (double hz : {50.0, 200.0, 5000.0, 15000.0})
        truth["sweep"]["magnitude"].push_back(
            {hz, units::db_from_ratio(std::abs(device.response(hz)) / tone_gain)});

    // Hiss of known density and hum of known harmonics.
    description = described("idle");
    description.gain_db = 40.0;
    auto idle = tests::white_noise(120000, units::sample_rms_from_dbfs(-80.0), 3);
    store(folder, "noise", idle, description);
    truth["noise"]["noise_output"] = 18.0 - 80.0 + 10.0 * std::log10((20000.0 - 20.0) / 24000.0);
    tests::add(idle, tests::hum(idle.size(), rate, 49.963, 0.02, {2e-3, 3e-4, 8e-4}));
    store(folder, "hum", idle, description);
    truth["hum"]["mains_frequency"] = 49.963;
    for (auto [number, peak] : {std::pair{1, 2e-3}, {2, 3e-4}, {3, 8e-4}})
        truth["hum"]["hum_harmonic"].push_back(
            {number, 18.0 + units::dbfs_from_sample_rms(peak / std::sqrt(2.0))});

    // Rejection of 72 dB at each of three tones.
    const auto tones = played(signal::Multitone{{85.0, 997.0, 9973.0}}, 1.5, -12.0);
    description = described("differential");
    description.stimulus = tones;
    description.drive_dbu = -40.0;
    tests::Device flat;
    flat.gain = 0.3;
    flat.delay_frames = 417.63;
    store(folder, "differential", heard(tones, flat, 4), description);
    description.feed = "common-mode";
    description.drive_dbu = 0.0;
    flat.gain = 0.3 * units::ratio_from_db(40.0 - 72.0);
    store(folder, "common-mode", heard(tones, flat, 5), description);
    truth["cmrr"]["common_mode_rejection"] = 72.0;
    std::ofstream(folder + "/truth.json") << truth.dump(2) << "\n";
}
