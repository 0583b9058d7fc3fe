#include "coldpin/signal/wav.h"

#include <algorithm>
#include <array>
#include <cmath>
#include <cstdint>
#include <cstring>
#include <fstream>
#include <limits>
#include <memory>
#include <system_error>

#include <fmt/core.h>
#include <sndfile.h>

#include "coldpin/units/error.h"

#include "safe_file.h"

namespace coldpin::signal {

namespace {

namespace fs = std::filesystem;

struct CloseSound {
    void operator()(SNDFILE* file) const { sf_close(file); }
};
using Sound = std::unique_ptr<SNDFILE, CloseSound>;

constexpr sf_count_t block_frames = 16384;
constexpr int most_channels = 256;

// libsndfile plays what is left of a file that was cut off and says nothing; the RIFF header knows better.
// Writers that stream leave 0 or 0xFFFFFFFF there, which promises nothing.
void require_whole_riff(const fs::path& file) {
    std::ifstream in(file, std::ios::binary);
    std::array<unsigned char, 8> head{};
    in.read(reinterpret_cast<char*>(head.data()), head.size());
    if (in.gcount() < 8 || std::memcmp(head.data(), "RIFF", 4) != 0) return;
    const std::uint32_t promised = head[4] | std::uint32_t{head[5]} << 8U | std::uint32_t{head[6]} << 16U |
                                   std::uint32_t{head[7]} << 24U;
    if (promised == 0 || promised == std::numeric_limits<std::uint32_t>::max()) return;
    std::error_code error;
    const std::uintmax_t size = fs::file_size(file, error);
    if (!error && size < std::uintmax_t{promised} + 8)
        throw UsageError(
            fmt::format("{}: is cut off: its header promises {} bytes, {} are there; record or copy it again",
                        file.string(), std::uintmax_t{promised} + 8, size));
}

void require_readable(const fs::path& file) {
    std::error_code error;
    if (!fs::exists(file, error)) throw UsageError(fmt::format("{}: there is no such file", file.string()));
    if (fs::is_directory(file, error))
        throw UsageError(fmt::format("{}: is a folder, expected a sound file", file.string()));
    if (fs::is_regular_file(file, error) && fs::file_size(file, error) == 0)
        throw UsageError(fmt::format("{}: is empty", file.string()));
}

}  // namespace

Recording read_wav(const fs::path& file) {
    require_readable(file);
    SF_INFO info{};
    Sound sound(sf_open(file.string().c_str(), SFM_READ, &info));
    if (!sound)
        throw UsageError(
            fmt::format("{}: is no sound file that can be read ({})", file.string(), sf_strerror(nullptr)));
    require_whole_riff(file);
    if (info.channels < 1 || info.channels > most_channels)
        throw UsageError(fmt::format("{}: has {} channels; expected 1 to {}", file.string(), info.channels,
                                     most_channels));
    if (info.frames < 1) throw UsageError(fmt::format("{}: holds no samples", file.string()));
    const auto channels = static_cast<std::size_t>(info.channels);
    Recording recording;
    recording.rate_hz = info.samplerate;
    recording.channels.assign(channels, {});
    // A broken header may promise anything: memory is taken as samples really come.
    for (auto& channel : recording.channels)
        channel.reserve(static_cast<std::size_t>(std::min<sf_count_t>(info.frames, 1 << 24)));
    std::vector<double> block(static_cast<std::size_t>(block_frames) * channels);
    sf_count_t total = 0, got = 0;
    while ((got = sf_readf_double(sound.get(), block.data(), block_frames)) > 0) {
        for (std::size_t c = 0; c < channels; ++c) {
            auto& channel = recording.channels[c];
            const std::size_t begin = channel.size();
            channel.resize(begin + static_cast<std::size_t>(got));
            double sum = 0.0;
            for (std::size_t n = 0; n < static_cast<std::size_t>(got); ++n) {
                const double x = block[n * channels + c];
                channel[begin + n] = x;
                sum += x * 0.0;  // stays 0 for finite numbers, turns NaN otherwise: one test a block
            }
            if (sum == 0.0) continue;
            const auto bad = std::find_if(channel.begin() + static_cast<std::ptrdiff_t>(begin), channel.end(),
                                          [](double x) { return !std::isfinite(x); });
            throw UsageError(fmt::format("{}: sample {} of channel {} is not a number; the file is damaged",
                                         file.string(), bad - channel.begin(), c + 1));
        }
        total += got;
    }
    if (total != info.frames)
        throw UsageError(fmt::format("{}: is cut off: {} of {} frames are there; record or copy it again",
                                     file.string(), total, info.frames));
    return recording;
}

void write_wav(const fs::path& file, const Recording& recording) {
    if (recording.channels.empty() || recording.frames() == 0)
        throw UsageError(fmt::format("{}: there are no samples to write", file.string()));
    const std::size_t channels = recording.channels.size(), frames = recording.frames();
    for (const auto& channel : recording.channels) {
        if (channel.size() != frames)
            throw UsageError(
                fmt::format("{}: channels of different lengths cannot be written", file.string()));
        if (!std::all_of(channel.begin(), channel.end(), [](double x) { return std::isfinite(x); }))
            throw UsageError(fmt::format("{}: holds a sample that is not a number", file.string()));
    }
    const std::uint64_t bytes = std::uint64_t{frames} * channels * sizeof(float);
    const bool is_long = bytes > 0xF0000000U;
    SF_INFO info{};
    info.samplerate = static_cast<int>(std::lround(recording.rate_hz));
    info.channels = static_cast<int>(channels);
    info.format = (is_long ? SF_FORMAT_RF64 : SF_FORMAT_WAV) | SF_FORMAT_FLOAT;
    write_then_rename(file, [&](const fs::path& temporary) {
        Sound sound(sf_open(temporary.string().c_str(), SFM_WRITE, &info));
        if (!sound)
            throw UsageError(fmt::format("{}: cannot be written: {}", file.string(), sf_strerror(nullptr)));
        // No PEAK chunk: it carries the time of writing, and the same samples should give the same file.
        sf_command(sound.get(), SFC_SET_ADD_PEAK_CHUNK, nullptr, SF_FALSE);
        std::vector<float> block(static_cast<std::size_t>(block_frames) * channels);
        for (std::size_t begin = 0; begin < frames; begin += static_cast<std::size_t>(block_frames)) {
            const std::size_t count = std::min(frames - begin, static_cast<std::size_t>(block_frames));
            for (std::size_t c = 0; c < channels; ++c)
                for (std::size_t n = 0; n < count; ++n)
                    block[n * channels + c] = static_cast<float>(recording.channels[c][begin + n]);
            if (sf_writef_float(sound.get(), block.data(), static_cast<sf_count_t>(count)) !=
                static_cast<sf_count_t>(count))
                throw UsageError(fmt::format("{}: could not be written whole ({}): is the disk full?",
                                             file.string(), sf_strerror(sound.get())));
        }
        sf_write_sync(sound.get());
        const int closed = sf_close(sound.release());
        std::error_code error;
        if (closed != 0 || fs::file_size(temporary, error) < bytes || error)
            throw UsageError(fmt::format("{}: could not be written whole: is the disk full?", file.string()));
    });
}

}  // namespace coldpin::signal
