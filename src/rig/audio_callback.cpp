#include "audio_callback.h"

#include <algorithm>
#include <cstring>
#include <utility>

namespace coldpin::rig {

namespace {

constexpr double ramp_s = 0.005;

}  // namespace

AudioExchange::AudioExchange(std::vector<std::vector<float>> what_to_play, std::size_t input_channels,
                             double rate_hz)
    : play(std::move(what_to_play)),
      frames(play.empty() ? 0 : play.front().size()),
      ramp_frames(std::max<std::size_t>(1, static_cast<std::size_t>(ramp_s * rate_hz))) {
    record.assign(input_channels, std::vector<float>(frames, 0.0F));
}

bool exchange_block(AudioExchange& exchange, const float* const* in, float* const* out, std::size_t frames,
                    std::uint32_t flag_bits) noexcept {
    const std::size_t position = exchange.position.load(std::memory_order_relaxed);
    if (flag_bits != 0) {
        const std::size_t count = exchange.flag_count.load(std::memory_order_relaxed);
        if (count < exchange.flags.size()) exchange.flags[count] = {position, flag_bits};
        exchange.flag_count.store(count + 1, std::memory_order_relaxed);
    }
    const std::size_t now = std::min(frames, exchange.frames - position);
    for (std::size_t c = 0; c < exchange.play.size(); ++c) {
        if (now > 0) std::memcpy(out[c], exchange.play[c].data() + position, now * sizeof(float));
        if (frames > now) std::memset(out[c] + now, 0, (frames - now) * sizeof(float));
    }
    if (in != nullptr && now > 0)
        for (std::size_t c = 0; c < exchange.record.size(); ++c)
            std::memcpy(exchange.record[c].data() + position, in[c], now * sizeof(float));

    bool done = position + now >= exchange.frames;
    if (exchange.stop.load(std::memory_order_relaxed)) {
        if (!exchange.ramping_) {
            exchange.ramping_ = true;
            exchange.ramp_left_ = exchange.ramp_frames;
        }
        for (std::size_t n = 0; n < frames; ++n) {
            const float gain =
                static_cast<float>(exchange.ramp_left_) / static_cast<float>(exchange.ramp_frames);
            for (std::size_t c = 0; c < exchange.play.size(); ++c) out[c][n] *= gain;
            if (exchange.ramp_left_ > 0) --exchange.ramp_left_;
        }
        done = done || exchange.ramp_left_ == 0;
    }
    exchange.period.store(frames, std::memory_order_relaxed);
    exchange.position.store(position + now, std::memory_order_release);
    exchange.calls.fetch_add(1, std::memory_order_release);
    if (done) exchange.finished.store(true, std::memory_order_release);
    return done;
}

}  // namespace coldpin::rig
