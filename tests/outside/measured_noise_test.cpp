// The noise measurement from samples to figures against physics and the trade.
// Thermal noise: Johnson (1928) and Nyquist (1928), v = sqrt(4 k T R B), with the exact k of the SI (SI
// Brochure, 9th edition). Noise figure: F = 1 + (en^2 + in^2 R^2) / (4 k 290 K R), the IRE/IEEE definition;
// the en, in examples are calculated from that formula, to 0.01 dB. Subtraction of powers: common practice,
// calculated. A-weighted white noise: integral of the formula of IEC 61672-1.
#include <gtest/gtest.h>

#include "coldpin/measure/noise.h"
#include "coldpin/spectrum/weighting.h"
#include "coldpin/units/level.h"

#include "kit/signals.h"

namespace coldpin::measure {
namespace {

constexpr double rate = 48000.0, gain_db = 60.0, full_scale_dbu = 18.0, length_s = 20.0;
constexpr std::size_t frames = static_cast<std::size_t>(length_s * rate);

// Samples of white noise whose density at the preamp's input is given.
std::vector<double> amplified(double input_density_v, unsigned seed) {
    // 0 dBFS is a sine of +18 dBu: sqrt(0.6) V * 10^(18/20) RMS for 1/sqrt(2) in samples.
    const double volts_per_unit = std::sqrt(0.6) * std::pow(10.0, full_scale_dbu / 20.0) * std::sqrt(2.0);
    return tests::white_noise(
        frames, input_density_v * std::pow(10.0, gain_db / 20.0) * std::sqrt(0.5 * rate) / volts_per_unit,
        seed);
}

NoiseQuestion ask(const std::vector<double>& x, double ohms, double temperature_c) {
    NoiseQuestion question;
    question.recording = x;
    question.rate_hz = rate;
    question.scale.full_scale_dbu = full_scale_dbu;
    question.gain_db = KnownLevel{gain_db, 0.05};
    question.source_ohms = ohms;
    question.temperature_c = temperature_c;
    return question;
}

double input_dbu(const Findings& findings, const char* weighting) {
    return findings.figure("noise_input_referred", {{"weighting", std::string(weighting)}})->value;
}

// White noise over 20 s and 20 kHz scatters by 0.0069 dB, weighted by A about half as much again: 0.03 dB are
// three standard deviations or more.
constexpr double chance_db = 0.03;

TEST(MeasuredNoiseOutsideTest, ResistorsAreAsNoisyAsPhysicsSays) {
    struct Row {
        double ohms, kelvin, nanovolts_per_root_hz, dbu, a_dbu, itu468_dbu;
    };
    for (const Row& row : {Row{150.0, 290.0, 1.5499, -130.97, -133.02, -123.67},
                           Row{200.0, 290.0, 1.7897, -129.72, -131.77, -122.42}}) {
        const auto x = amplified(row.nanovolts_per_root_hz * 1e-9, 7);
        const auto findings = noise(ask(x, row.ohms, row.kelvin - 273.15));
        EXPECT_NEAR(input_dbu(findings, "none"), row.dbu, chance_db);
        EXPECT_NEAR(input_dbu(findings, "A"), row.a_dbu, chance_db);
        EXPECT_NEAR(input_dbu(findings, "468"), row.itu468_dbu,
                    1.7 * chance_db);  // most of it from a third of the band
        EXPECT_NEAR(findings.figure("noise_figure")->value, 0.0, chance_db);
    }
}

TEST(MeasuredNoiseOutsideTest, AWeightedWhiteNoiseLiesTwoDecibelsLower) {
    const auto x = tests::white_noise(frames, 1e-3, 3);
    NoiseQuestion question;
    question.recording = x;
    question.rate_hz = rate;
    const auto findings = noise(question);
    const auto level = [&](const char* weighting) {
        return findings.figure("noise_output", {{"weighting", std::string(weighting)}})->value;
    };
    EXPECT_NEAR(level("A") - level("none"), -2.05, chance_db);
}

TEST(MeasuredNoiseOutsideTest, NoiseFiguresAreThoseOfTheFormula) {
    struct Row {
        double en_nv, in_pa, ohms, noise_figure_db, input_dbu;
    };
    for (const Row& row : {Row{1.0, 2.0, 150.0, 1.625, -129.34}, Row{3.0, 0.6, 200.0, 5.814, -123.91},
                           Row{5.0, 0.6, 150.0, 10.573, -120.40}}) {
        // 4 k T R from the value of 1 ohm at 290 K: 1.6015e-20 V^2/Hz.
        const double own = std::pow(row.en_nv * 1e-9, 2) + std::pow(row.in_pa * 1e-12 * row.ohms, 2);
        const auto cool = amplified(std::sqrt(own + 1.60153e-20 * row.ohms), 11);
        const auto at_reference = noise(ask(cool, row.ohms, 16.85));
        EXPECT_NEAR(at_reference.figure("noise_figure")->value, row.noise_figure_db, chance_db);
        EXPECT_NEAR(input_dbu(at_reference, "none"), row.input_dbu, chance_db + 0.005);
        // A warmer source makes more noise, the same amplifier has the same noise figure.
        const auto warm = amplified(std::sqrt(own + 1.60153e-20 * row.ohms * 303.15 / 290.0), 11);
        EXPECT_NEAR(noise(ask(warm, row.ohms, 30.0)).figure("noise_figure")->value, row.noise_figure_db,
                    chance_db);
    }
}

TEST(MeasuredNoiseOutsideTest, TheInterfacesNoiseReadsHighByWhatTheTradesTableSays) {
    // The unit's noise over the interface's, and by how much the uncorrected sum reads high.
    const double rows[][2] = {{3.0, 1.76}, {6.0, 0.97}, {10.0, 0.41}, {15.0, 0.14}, {20.0, 0.04}};
    const double interface_rms = 1e-4;
    const auto idle = tests::white_noise(frames, interface_rms, 21);
    for (const auto& [above_db, reads_high_db] : rows) {
        const double own_rms = interface_rms * std::pow(10.0, above_db / 20.0);
        auto x = tests::white_noise(frames, own_rms, 22);
        tests::add(x, tests::white_noise(frames, interface_rms, 23));
        NoiseQuestion question;
        question.recording = x;
        question.rate_hz = rate;
        const double truth = units::dbfs_from_sample_rms(own_rms * std::sqrt(19980.0 / 24000.0));
        EXPECT_NEAR(noise(question).figure("noise_output")->value - truth, reads_high_db, chance_db);
        question.interface_idle = idle;
        const auto corrected = *noise(question).figure("noise_output");
        EXPECT_EQ(corrected.bound, Bound::exact);
        EXPECT_NEAR(corrected.value, truth, 2.0 * chance_db);
        EXPECT_NEAR(corrected.value, truth, corrected.uncertainty);
    }
}

}  // namespace
}  // namespace coldpin::measure
