#include "coldpin/signal/wav.h"

#include <cmath>
#include <fstream>
#include <limits>
#include <random>

#include <gmock/gmock.h>
#include <gtest/gtest.h>

#include "coldpin/signal/text_file.h"
#include "coldpin/units/error.h"

namespace coldpin::signal {
namespace {

namespace fs = std::filesystem;
using testing::HasSubstr;

class WavTest : public testing::Test {
  protected:
    void SetUp() override {
        folder = fs::temp_directory_path() /
                 ("coldpin-wav-" + std::to_string(::testing::UnitTest::GetInstance()->random_seed()) + "-" +
                  ::testing::UnitTest::GetInstance()->current_test_info()->name());
        fs::remove_all(folder);
        fs::create_directories(folder);
    }
    void TearDown() override { fs::remove_all(folder); }
    fs::path folder;

    static std::string refusal(const std::function<void()>& act) {
        try {
            act();
        } catch (const UsageError& error) {
            return error.what();
        }
        return "";
    }
};

Recording noise(std::size_t channels, std::size_t frames) {
    std::mt19937 generator(5);
    std::normal_distribution<double> normal(0.0, 0.1);
    Recording recording;
    recording.rate_hz = 96000.0;
    recording.channels.assign(channels, std::vector<double>(frames));
    for (auto& channel : recording.channels)
        for (double& x : channel) x = static_cast<double>(static_cast<float>(normal(generator)));
    return recording;
}

TEST_F(WavTest, SamplesThatCameFromFloatKeepTheirBits) {
    const Recording written = noise(3, 40001);
    write_wav(folder / "a.wav", written);
    const Recording read = read_wav(folder / "a.wav");
    EXPECT_EQ(read.rate_hz, 96000.0);
    EXPECT_EQ(read.channels, written.channels);
}

TEST_F(WavTest, TheSameSamplesGiveTheSameFile) {
    write_wav(folder / "a.wav", noise(1, 1000));
    write_wav(folder / "b.wav", noise(1, 1000));
    EXPECT_EQ(read_text_file(folder / "a.wav"), read_text_file(folder / "b.wav"));
}

TEST_F(WavTest, SixteenBitSamplesAreScaledToFullScaleOne) {
    // By hand: one channel, 8 kHz, samples 32767, -32768, 16384, 0.
    const unsigned char bytes[] = {'R', 'I', 'F',  'F',  44, 0,    0,    0,    'W',  'A',  'V',  'E',  'f',
                                   'm', 't', ' ',  16,   0,  0,    0,    1,    0,    1,    0,    0x40, 0x1f,
                                   0,   0,   0x80, 0x3e, 0,  0,    2,    0,    16,   0,    'd',  'a',  't',
                                   'a', 8,   0,    0,    0,  0xff, 0x7f, 0x00, 0x80, 0x00, 0x40, 0,    0};
    std::ofstream(folder / "pcm.wav", std::ios::binary)
        .write(reinterpret_cast<const char*>(bytes), sizeof bytes);
    const Recording read = read_wav(folder / "pcm.wav");
    ASSERT_EQ(read.frames(), 4U);
    EXPECT_DOUBLE_EQ(read.channels[0][0], 32767.0 / 32768.0);
    EXPECT_DOUBLE_EQ(read.channels[0][1], -1.0);
    EXPECT_DOUBLE_EQ(read.channels[0][2], 0.5);
    EXPECT_DOUBLE_EQ(read.channels[0][3], 0.0);
}

TEST_F(WavTest, AFileCutOffAnywhereIsRefused) {
    write_wav(folder / "whole.wav", noise(1, 5000));
    const std::string bytes = read_text_file(folder / "whole.wav");
    for (std::size_t size : {std::size_t{10}, std::size_t{60}, bytes.size() / 2, bytes.size() - 4}) {
        std::ofstream(folder / "cut.wav", std::ios::binary) << bytes.substr(0, size);
        EXPECT_THAT(refusal([&] { read_wav(folder / "cut.wav"); }), HasSubstr("cut.wav")) << size;
    }
}

TEST_F(WavTest, WhatIsNoRecordingIsNamed) {
    EXPECT_THAT(refusal([&] { read_wav(folder / "none.wav"); }), HasSubstr("none.wav"));
    EXPECT_THAT(refusal([&] { read_wav(folder); }), HasSubstr("folder"));
    std::ofstream(folder / "empty.wav").flush();
    EXPECT_THAT(refusal([&] { read_wav(folder / "empty.wav"); }), HasSubstr("empty"));
    std::ofstream(folder / "text.wav") << "not a sound at all, but long enough to be looked at";
    EXPECT_THAT(refusal([&] { read_wav(folder / "text.wav"); }), HasSubstr("text.wav"));
}

TEST_F(WavTest, ANumberThatIsNoneIsRefusedBothWays) {
    Recording recording = noise(1, 100);
    recording.channels[0][70] = std::numeric_limits<double>::infinity();
    EXPECT_THAT(refusal([&] { write_wav(folder / "x.wav", recording); }), HasSubstr("not a number"));
    EXPECT_TRUE(fs::is_empty(folder));
}

TEST_F(WavTest, NothingIsLeftWhereWritingFails) {
    EXPECT_THAT(refusal([&] { write_wav(folder / "no" / "a.wav", noise(1, 10)); }),
                HasSubstr("does not exist"));
    EXPECT_THAT(refusal([&] { write_text_file(folder / "no" / "a.txt", "x"); }), HasSubstr("does not exist"));
    EXPECT_TRUE(fs::is_empty(folder));
}

TEST_F(WavTest, AChannelThatDoesNotExistIsRefused) {
    const Recording recording = noise(2, 10);
    EXPECT_EQ(recording.channel(2).size(), 10U);
    EXPECT_THAT(refusal([&] { recording.channel(3, "a.wav"); }),
                testing::AllOf(HasSubstr("a.wav"), HasSubstr("3"), HasSubstr("2")));
    EXPECT_NE(refusal([&] { recording.channel(0); }), "");
}

}  // namespace
}  // namespace coldpin::signal
