#include "coldpin/spectrum/averaged_spectrum.h"

#include <gtest/gtest.h>

#include "coldpin/units/error.h"

#include "kit/signals.h"

namespace coldpin::spectrum {
namespace {

TEST(AveragedSpectrumTest, TheSumOverAllBinsIsTheMeanSquare) {
    const auto x = tests::white_noise(400000, 0.1, 1);
    const auto spectrum = averaged_spectrum(x, 48000.0);
    double sum = 0.0;
    for (double d : spectrum.density) sum += d * spectrum.bin_hz;
    // Relative standard deviation of a mean square of 400,000 samples: sqrt(2/400000) = 0.0022.
    EXPECT_NEAR(sum, 0.01, 5 * 0.0022 * 0.01);
}

TEST(AveragedSpectrumTest, ASinesPowerIsInItsMainLobeWhereverItLiesBetweenBins) {
    for (double offset : {0.0, 0.25, 0.5}) {
        WelchSettings settings;
        settings.segment = 4800;
        const double hz = 1000.0 + 10.0 * offset;
        const auto spectrum = averaged_spectrum(tests::sine(96000, 48000.0, hz, 0.2), 48000.0, settings);
        double sum = 0.0;
        for (std::size_t k = 90; k <= 110; ++k) sum += spectrum.density[k] * spectrum.bin_hz;
        EXPECT_NEAR(sum, 0.02, 0.02 * 1e-6);  // side lobes of the window lie 92 dB down
    }
}

TEST(AveragedSpectrumTest, AConstantDoesNotMatter) {
    auto x = tests::white_noise(50000, 0.01, 2);
    const auto before = averaged_spectrum(x, 48000.0);
    for (double& v : x) v += 0.5;
    const auto after = averaged_spectrum(x, 48000.0);
    for (std::size_t k = 3; k < before.density.size(); ++k)
        EXPECT_NEAR(after.density[k], before.density[k], 1e-12);
}

TEST(AveragedSpectrumTest, DegreesOfFreedomDescribeTheScatter) {
    // Over seeds the variance of a bin must be 2 S^2 / nu; 400 seeds tell a variance to 7 %: five of those.
    WelchSettings settings;
    settings.segment = 512;
    settings.overlap = 0.5;
    settings.window = Window::hann;
    std::vector<double> values;
    double freedom = 0.0;
    for (unsigned seed = 0; seed < 400; ++seed) {
        const auto spectrum = averaged_spectrum(tests::white_noise(5632, 1.0, seed), 1.0, settings);
        values.push_back(spectrum.density[100]);
        freedom = spectrum.degrees_of_freedom;
    }
    double mean = 0.0, variance = 0.0;
    for (double v : values) mean += v / 400.0;
    for (double v : values) variance += (v - mean) * (v - mean) / 399.0;
    EXPECT_NEAR(variance / (mean * mean), 2.0 / freedom, 0.35 * 2.0 / freedom);
}

TEST(AveragedSpectrumTest, BandPowerCountsEdgeBinsByTheirShare) {
    AveragedSpectrum flat;
    flat.bin_hz = 10.0;
    flat.density.assign(101, 2.0);
    flat.duration_s = 4.0;
    const auto power = band_power(flat, 23.0, 77.0, [](double) { return 1.0; });
    EXPECT_NEAR(power.mean_square, 2.0 * 54.0, 1e-9);
    EXPECT_NEAR(power.variance, 4.0 * 54.0 / 4.0, 1e-9);
}

TEST(AveragedSpectrumTest, ACrossSpectrumKeepsWhatIsCommonOnly) {
    const auto common = tests::white_noise(960000, 0.1, 1);
    auto a = common, b = common;
    tests::add(a, tests::white_noise(960000, 0.3, 2));
    tests::add(b, tests::white_noise(960000, 0.3, 3));
    WelchSettings settings;
    settings.segment = 4096;
    const auto cross = averaged_cross_spectrum(a, b, 48000.0, settings);
    double mean = 0.0;
    for (std::size_t k = 100; k < 1900; ++k) mean += cross[k].real() / 1800.0;
    EXPECT_NEAR(mean, 0.01 / 24000.0, 0.05 * 0.01 / 24000.0);
}

TEST(AveragedSpectrumTest, RefusesTooLittle) {
    EXPECT_THROW(averaged_spectrum(std::vector<double>(10, 0.0), 48000.0), UsageError);
    EXPECT_THROW(averaged_spectrum(std::vector<double>(100, 0.0), 0.0), UsageError);
}

}  // namespace
}  // namespace coldpin::spectrum
