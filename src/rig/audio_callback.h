// What happens on the audio thread, and the memory it works on.
#pragma once

#include <array>
#include <atomic>
#include <cstddef>
#include <cstdint>
#include <vector>

namespace coldpin::rig {

// All memory is there before the stream starts and stays until it is closed. While the stream runs only the
// callback touches `play`, `record` and `flags`; other threads read the atomics and may set `stop`.
struct AudioExchange {
    AudioExchange(std::vector<std::vector<float>> what_to_play, std::size_t input_channels, double rate_hz);

    std::vector<std::vector<float>> play;    // per output channel, all of one length
    std::vector<std::vector<float>> record;  // per input channel, as long
    std::size_t frames = 0;
    std::size_t ramp_frames = 1;  // a stop fades the outputs over so many

    std::atomic<std::size_t> position{0};  // frames played and recorded
    std::atomic<std::uint64_t> calls{0};
    std::atomic<std::size_t> period{0};  // frames of the last call
    std::atomic<bool> stop{false};
    std::atomic<bool> finished{false};  // nothing will be played any more

    struct Flag {
        std::size_t frame = 0;
        std::uint32_t bits = 0;
    };
    std::array<Flag, 64> flags{};
    std::atomic<std::size_t> flag_count{0};  // may exceed the array: the rest was only counted

  private:
    friend bool exchange_block(AudioExchange&, const float* const*, float* const*, std::size_t,
                               std::uint32_t) noexcept;
    std::size_t ramp_left_ = 0;
    bool ramping_ = false;
};

// One block: `frames` in and out, non-interleaved; `in` may be null (driver without input yet): zeros are
// kept. Returns true when all is done. Neither allocates, locks, calls the system, throws nor logs.
bool exchange_block(AudioExchange& exchange, const float* const* in, float* const* out, std::size_t frames,
                    std::uint32_t flag_bits) noexcept;

}  // namespace coldpin::rig
