// A preamp made of software between the playback and the capture side of a JACK server, with known truth.
//
//   virtual_preamp [--gain G] [--conversion K] [--noise RMS] [--delay N] [--freewheel 1]
//                  [--lose-at FRAME] [--zero-at FRAME] [--leave-at FRAME]
//                  [--reference-gain R] [--monitor SHARE] [--limit PEAK]
//
// in_1: what the differential pad is fed with; in_2: the common-mode feed. out_1 = G (in_1 + K in_2) + noise;
// out_2 = in_1 + in_2, the reference tap. Faults happen once, FRAME frames after something is first heard: 7
// frames are lost for good, 7 are zeroed, or the preamp leaves. The path can be dishonest besides: the tap at
// another level, a share of out_1 mixed back into what is heard, both outputs limited 3 to 1 from a peak on.
#include <atomic>
#include <cmath>
#include <csignal>
#include <cstdint>
#include <cstdio>
#include <cstdlib>
#include <map>
#include <string>
#include <vector>

#include <jack/jack.h>
#include <unistd.h>

namespace {

constexpr std::size_t fault_frames = 7;
std::atomic<int> leave{0};

struct Preamp {
    double gain = 1.0, conversion = 0.0, noise = 0.0;
    double reference_gain = 1.0, monitor = 0.0, limit = 0.0;
    double envelope = 0.0;
    std::vector<double> mixed = std::vector<double>(480, 0.0);  // 10 ms of out_1, to be mixed back
    std::size_t mixed_at = 0;

    double limited(double x) {
        if (limit <= 0.0) return x;
        const double size = x < 0.0 ? -x : x;
        envelope = size > envelope ? envelope + 0.005 * (size - envelope) : envelope * 0.9998;
        return envelope > limit ? x * std::pow(envelope / limit, -2.0 / 3.0) : x;
    }
    std::size_t delay = 0;
    std::uint64_t lose_at = UINT64_MAX, zero_at = UINT64_MAX, leave_at = UINT64_MAX;
    bool heard = false;
    std::uint64_t frame = 0;  // since something was first heard
    std::uint32_t random = 12345;
    std::size_t at = 0;
    std::vector<float> line[2];  // delay lines
    jack_port_t* in[2] = {};
    jack_port_t* out[2] = {};

    // About Gaussian: twelve uniform numbers (irwin-hall), cheap and the same everywhere.
    double hiss() {
        double sum = -6.0;
        for (int i = 0; i < 12; ++i) {
            random = random * 1664525U + 1013904223U;
            sum += static_cast<double>(random >> 8U) / 16777216.0;
        }
        return sum;
    }
};

int process(jack_nframes_t frames, void* user) {
    auto& unit = *static_cast<Preamp*>(user);
    const float* in[2];
    float* out[2];
    for (int c = 0; c < 2; ++c) {
        in[c] = static_cast<const float*>(jack_port_get_buffer(unit.in[c], frames));
        out[c] = static_cast<float*>(jack_port_get_buffer(unit.out[c], frames));
    }
    const bool straight = unit.gain == 1.0 && unit.conversion == 0.0 && unit.noise == 0.0 &&
                          unit.reference_gain == 1.0 && unit.monitor == 0.0 &&
                          unit.limit == 0.0;  // keeps the bits
    for (jack_nframes_t n = 0; n < frames; ++n) {
        unit.heard = unit.heard || in[0][n] != 0.0F || in[1][n] != 0.0F;
        if (unit.heard) ++unit.frame;
        if (unit.frame == unit.lose_at && unit.delay >= fault_frames) unit.delay -= fault_frames;
        if (unit.frame == unit.leave_at) leave = 1;
        const double back = unit.monitor * unit.mixed[unit.mixed_at];
        const double heard = unit.limited(unit.gain * (in[0][n] + back + unit.conversion * in[1][n]));
        unit.mixed[unit.mixed_at] = heard;
        unit.mixed_at = (unit.mixed_at + 1) % unit.mixed.size();
        unit.line[0][unit.at] = straight ? in[0][n] : static_cast<float>(heard);
        unit.line[1][unit.at] =
            straight ? in[1][n]
                     : static_cast<float>(unit.limited(unit.reference_gain * (in[0][n] + back + in[1][n])));
        const std::size_t from = (unit.at + unit.line[0].size() - unit.delay) % unit.line[0].size();
        const bool zeroed = unit.frame >= unit.zero_at && unit.frame < unit.zero_at + fault_frames;
        for (int c = 0; c < 2; ++c) {
            const double hiss = straight ? 0.0 : unit.noise * unit.hiss();
            out[c][n] = zeroed
                            ? 0.0F
                            : (straight ? unit.line[c][from] : static_cast<float>(unit.line[c][from] + hiss));
        }
        unit.at = (unit.at + 1) % unit.line[0].size();
    }
    return 0;
}

}  // namespace

int main(int argc, char** argv) {
    Preamp unit;
    std::map<std::string, double> options;
    for (int i = 1; i + 1 < argc; i += 2) options[argv[i]] = std::atof(argv[i + 1]);
    const auto option = [&](const char* name, double otherwise) {
        return options.count(name) > 0 ? options[name] : otherwise;
    };
    unit.gain = option("--gain", 1.0);
    unit.conversion = option("--conversion", 0.0);
    unit.noise = option("--noise", 0.0);
    unit.delay = static_cast<std::size_t>(option("--delay", 0.0));
    const auto frame_option = [&](const char* name) {
        return options.count(name) > 0 ? static_cast<std::uint64_t>(options[name]) : UINT64_MAX;
    };
    unit.reference_gain = option("--reference-gain", 1.0);
    unit.monitor = option("--monitor", 0.0);
    unit.limit = option("--limit", 0.0);
    unit.lose_at = frame_option("--lose-at");
    unit.zero_at = frame_option("--zero-at");
    unit.leave_at = frame_option("--leave-at");
    for (auto& line : unit.line) line.assign(unit.delay + 1, 0.0F);

    jack_client_t* client = jack_client_open(
        "preamp", static_cast<jack_options_t>(JackNoStartServer | JackUseExactName), nullptr);
    if (client == nullptr) {
        std::puts("no JACK server");
        return 3;
    }
    jack_set_process_callback(client, process, &unit);
    jack_on_shutdown(
        client, [](void*) { leave = 2; }, nullptr);
    for (int c = 0; c < 2; ++c) {
        const unsigned long flags = JackPortIsPhysical | JackPortIsTerminal;
        unit.in[c] = jack_port_register(client, c == 0 ? "in_1" : "in_2", JACK_DEFAULT_AUDIO_TYPE,
                                        JackPortIsInput | flags, 0);
        unit.out[c] = jack_port_register(client, c == 0 ? "out_1" : "out_2", JACK_DEFAULT_AUDIO_TYPE,
                                         JackPortIsOutput | flags, 0);
    }
    std::signal(SIGTERM, [](int) { leave = 1; });
    if (jack_activate(client) != 0) return 4;
    if (option("--freewheel", 0.0) != 0.0) jack_set_freewheel(client, 1);
    std::puts("ready");
    std::fflush(stdout);
    while (leave == 0) usleep(5000);
    if (leave == 2) _exit(0);  // the server is gone: closing could wait for it for ever
    jack_client_close(client);
    return 0;
}
