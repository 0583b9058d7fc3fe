#include "coldpin/spectrum/fft.h"

#include <atomic>
#include <thread>

#include <gtest/gtest.h>

#include "coldpin/units/error.h"

#include "kit/signals.h"

namespace coldpin::spectrum {
namespace {

// The definition itself, slow and plain.
std::vector<std::complex<double>> direct(const std::vector<double>& x, std::size_t size) {
    std::vector<std::complex<double>> bins(size / 2 + 1);
    for (std::size_t k = 0; k < bins.size(); ++k)
        for (std::size_t n = 0; n < x.size(); ++n)
            bins[k] += x[n] * std::polar(1.0, -tests::two_pi * static_cast<double>((k * n) % size) /
                                                  static_cast<double>(size));
    return bins;
}

TEST(FftTest, IsTheDirectSumForAnySizeAndPadding) {
    for (std::size_t length : {1U, 2U, 7U, 64U, 100U, 243U})
        for (std::size_t size : {length, length + 5, 2 * length}) {
            const auto x = tests::white_noise(length, 1.0, static_cast<unsigned>(length));
            const auto fast = forward_fft(x, size), slow = direct(x, size);
            ASSERT_EQ(fast.size(), slow.size());
            // Rounding grows with the square root of the terms; 1e-12 is a thousand times that.
            for (std::size_t k = 0; k < fast.size(); ++k)
                EXPECT_NEAR(std::abs(fast[k] - slow[k]), 0.0, 1e-12 * std::sqrt(static_cast<double>(length)));
        }
}

TEST(FftTest, TheInverseGivesTheSamplesBack) {
    for (std::size_t size : {2U, 9U, 1000U, 4096U}) {
        const auto x = tests::white_noise(size, 1.0, 3);
        const auto back = inverse_fft(forward_fft(x), size);
        for (std::size_t n = 0; n < size; ++n) EXPECT_NEAR(back[n], x[n], 1e-13);
    }
}

TEST(FftTest, TheSameSamplesGiveTheSameBitsWhereverTheyLie) {
    const auto x = tests::white_noise(30001, 1.0, 9);
    std::vector<double> shifted(x.size() + 1);
    std::copy(x.begin(), x.end(), shifted.begin() + 1);
    EXPECT_EQ(forward_fft(x), forward_fft(std::span(shifted).subspan(1)));
}

TEST(FftTest, ThreadsMayTransformAtOnce) {
    const auto x = tests::white_noise(5000, 1.0, 4);
    const auto expected = forward_fft(x, 6000);
    std::vector<std::thread> threads;
    std::atomic<int> wrong{0};
    for (int t = 0; t < 4; ++t)
        threads.emplace_back([&, t] {
            for (int round = 0; round < 20; ++round) {
                if (forward_fft(x, 6000) != expected) ++wrong;
                forward_fft(x, 5000 + static_cast<std::size_t>(t * 20 +
                                                               round));  // new sizes: the planner is busy too
            }
        });
    for (auto& thread : threads) thread.join();
    EXPECT_EQ(wrong, 0);
}

TEST(FftTest, FastSizesAreLargeEnoughAndSmooth) {
    for (std::size_t n = 1; n < 3000; n += 13) {
        std::size_t size = fast_fft_size(n);
        EXPECT_GE(size, n);
        EXPECT_LT(size, 2 * n + 1);
        for (std::size_t factor : {2U, 3U, 5U})
            while (size % factor == 0) size /= factor;
        EXPECT_EQ(size, 1U) << n;
    }
}

TEST(FftTest, RefusesSizesThatDoNotFit) {
    const std::vector<double> x(8, 1.0);
    EXPECT_THROW(forward_fft(x, 4), UsageError);
    EXPECT_THROW(forward_fft(std::vector<double>{}), UsageError);
    EXPECT_THROW(inverse_fft(forward_fft(x), 20), UsageError);
}

}  // namespace
}  // namespace coldpin::spectrum
