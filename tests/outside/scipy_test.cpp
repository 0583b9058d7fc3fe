// Spectra, filters and deconvolution against scipy on the same samples (scipy 1.10, Debian's python3-scipy).
#include <cstdio>
#include <filesystem>
#include <fstream>
#include <memory>

#include <gtest/gtest.h>

#include "coldpin/measure/response.h"
#include "coldpin/rig/path_check.h"
#include "coldpin/spectrum/averaged_spectrum.h"
#include "coldpin/spectrum/resample.h"

#include "kit/signals.h"

namespace coldpin {
namespace {

std::vector<double> scipy(const std::string& kind, const std::vector<double>& samples,
                          const std::string& rest = "") {
    const auto file = std::filesystem::temp_directory_path() /
                      ("coldpin-scipy-" + kind + "-" + std::to_string(samples.size()) + ".f64");
    std::ofstream(file, std::ios::binary)
        .write(reinterpret_cast<const char*>(samples.data()),
               static_cast<std::streamsize>(samples.size() * sizeof(double)));
    const std::string command = std::string(COLDPIN_PYTHON) +
                                " '" COLDPIN_SOURCE_DIR "/tests/outside/scipy_reference.py' " + kind + " '" +
                                file.string() + "' " + rest;
    struct Close {
        void operator()(std::FILE* pipe) const { pclose(pipe); }
    };
    const std::unique_ptr<std::FILE, Close> pipe(popen(command.c_str(), "r"));
    std::vector<double> numbers;
    double block[4096];
    std::size_t got = 0;
    while (pipe && (got = std::fread(block, sizeof(double), 4096, pipe.get())) > 0)
        numbers.insert(numbers.end(), block, block + got);
    std::filesystem::remove(file);
    EXPECT_FALSE(numbers.empty())
        << "scipy gave nothing: is python3-scipy installed (docs/install-packages.sh tests)?";
    return numbers;
}

TEST(ScipyOutsideTest, TheAveragedSpectrumIsItsWelch) {
    auto x = tests::white_noise(60000, 0.1, 5);
    tests::add(x, tests::sine(60000, 48000.0, 1003.0, 0.3));
    for (double& v : x) v += 0.02;
    spectrum::WelchSettings settings;
    settings.segment = 4096;
    const auto ours = spectrum::averaged_spectrum(x, 48000.0, settings);
    const auto theirs = scipy("welch", x, "48000 4096");
    ASSERT_EQ(ours.density.size(), theirs.size());
    // Both sum some 60 segments in double: 1e-9 is ten thousand times the rounding. Bins at 0 Hz hold only
    // what the removed mean left.
    for (std::size_t k = 1; k < theirs.size(); ++k) EXPECT_NEAR(ours.density[k] / theirs[k], 1.0, 1e-9) << k;
}

TEST(ScipyOutsideTest, TheTransformIsItsTransform) {
    const auto x = tests::white_noise(5040, 1.0, 6);
    const auto ours = spectrum::forward_fft(x);
    const auto theirs = scipy("fft", x);
    ASSERT_EQ(2 * ours.size(), theirs.size());
    for (std::size_t k = 0; k < ours.size(); ++k)
        EXPECT_NEAR(std::abs(ours[k] - std::complex<double>(theirs[2 * k], theirs[2 * k + 1])), 0.0, 1e-10);
}

TEST(ScipyOutsideTest, TheResponseOfItsFilterIsItsFrequencyResponse) {
    signal::Stimulus stimulus;
    stimulus.kind = signal::Sweep{10.0, 22000.0};
    stimulus.length_s = 3.0;
    stimulus.level_dbfs = -12.0;
    auto sent = signal::render(stimulus);
    std::vector<double> padded(4800, 0.0);
    padded.insert(padded.end(), sent.begin(), sent.end());
    padded.resize(padded.size() + 30000, 0.0);
    const auto theirs = scipy("device", padded, "48000");
    ASSERT_EQ(theirs.size(), padded.size() + 61);
    auto recorded = std::vector<double>(theirs.begin(), theirs.end() - 61);
    tests::add(recorded, tests::white_noise(recorded.size(), 1e-5, 7));
    measure::ResponseQuestion question;
    question.recording = recorded;
    question.rate_hz = 48000.0;
    question.stimulus = stimulus;
    const auto findings = measure::response(question);
    const auto& magnitude = *findings.curve("magnitude");
    // freqz at 60 points from 20 Hz to 20 kHz; ours between its own points by a straight line over log f.
    const auto at = [&](const std::vector<double>& hz, const std::vector<double>& db, double f) {
        const auto above = std::lower_bound(hz.begin(), hz.end(), f * (1.0 - 1e-12));
        const auto b = static_cast<std::size_t>(above - hz.begin());
        if (b == 0 || std::abs(hz[b] - f) < 1e-9 * f) return db[b];
        const double part = std::log(f / hz[b - 1]) / std::log(hz[b] / hz[b - 1]);
        return db[b - 1] * (1.0 - part) + db[b] * part;
    };
    std::vector<double> their_hz, their_db(theirs.end() - 61, theirs.end());
    for (int i = 0; i <= 60; ++i) their_hz.push_back(20.0 * std::pow(1000.0, i / 60.0));
    const double reference =
        at(their_hz, their_db, 20.0 * std::pow(1000.0, 34 / 60.0));  // 1002.4 Hz: flat there
    for (int i = 0; i <= 60; ++i) {
        const auto k = static_cast<std::size_t>(i);
        // The straight line between 24ths of an octave misses a 12 dB-per-octave bend by at most 0.01 dB.
        EXPECT_NEAR(at(magnitude.x, magnitude.y, their_hz[k]), their_db[k] - reference, 0.03) << their_hz[k];
    }
}

// scipy as the operating system that resamples: found at 48 kHz through 44.1 kHz, and nothing found without.
TEST(ScipyOutsideTest, WhatScipyResampledIsFound) {
    auto probe = rig::render_path_probe(48000.0, -6.0);
    probe.insert(probe.begin(), 3000, 0.0);
    probe.resize(probe.size() + 9600, 0.0);
    const auto noise = tests::white_noise(probe.size(), 1e-5, 9);
    auto clean = probe;
    tests::add(clean, noise);
    EXPECT_TRUE(rig::check_path(clean, 48000.0, -6.0).findings.empty());
    auto through = scipy("there_and_back", probe, "147 160");
    tests::add(through, noise);
    const auto report = rig::check_path(through, 48000.0, -6.0);
    ASSERT_NE(report.finding(rig::PathFault::resampled), nullptr);
    EXPECT_NE(report.findings.front().sentence.find("44.1 kHz inside"), std::string::npos);
}

// Our windowed sinc against scipy's Fourier method, on band-limited noise that fades at both ends.
TEST(ScipyOutsideTest, ResamplingIsItsFourierResampling) {
    const std::size_t frames = 9600;
    tests::Device band;
    band.low_pass_hz = 4000.0;
    band.order = 4;
    auto x = tests::through(tests::white_noise(frames, 0.2, 11), band, 48000.0, frames);
    for (std::size_t n = 0; n < frames; ++n)
        x[n] *= std::pow(std::sin(std::numbers::pi * static_cast<double>(n) / frames), 2);
    const auto ours = spectrum::resampled(x, 48000.0, 44100.0);
    const auto theirs = scipy("resample", x, std::to_string(ours.size()));
    ASSERT_EQ(ours.size(), theirs.size());
    // What lies beyond 0.95 of half the lower rate is cut by one and not by the other: the fourth-order noise
    // there is 70 dB down, of 0.2.
    double worst = 0.0;
    for (std::size_t n = 500; n + 500 < ours.size(); ++n)
        worst = std::max(worst, std::abs(ours[n] - theirs[n]));
    EXPECT_LT(worst, 2e-4);
}

}  // namespace
}  // namespace coldpin
