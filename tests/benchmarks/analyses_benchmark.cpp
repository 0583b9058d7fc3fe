// How long the analyses take on recordings of ordinary length. `bash tests/benchmarks/run.sh` prints medians.
#include <benchmark/benchmark.h>

#include "coldpin/check/analysis.h"
#include "coldpin/rig/content_check.h"

#include "kit/signals.h"

namespace {

using namespace coldpin;

constexpr double rate = 48000.0;

check::DescribedRecording taken(signal::StimulusKind kind, double length_s) {
    signal::Stimulus stimulus;
    stimulus.kind = std::move(kind);
    stimulus.length_s = length_s;
    stimulus.level_dbfs = -12.0;
    tests::Device device;
    device.gain = 0.4;
    device.high_pass_hz = 6.0;
    device.low_pass_hz = 60000.0;
    device.delay_frames = 391.4;
    auto sent = signal::render(stimulus);
    auto x = tests::through(sent, device, rate, sent.size() + 24000);
    tests::add(x, tests::white_noise(x.size(), 1e-4, 1));
    tests::add(x, tests::hum(x.size(), rate, 50.01, 0.01, {2e-4, 0.0, 5e-5}));
    check::DescribedRecording take;
    take.name = "benchmark";
    take.recording = {rate, {x}};
    take.description.stimulus = stimulus;
    take.description.input_full_scale_dbu = 18.0;
    take.description.drive_dbu = -40.0;
    return take;
}

void analyse(benchmark::State& state, const char* kind, const check::DescribedRecording& take,
             const check::DescribedRecording* common_mode = nullptr) {
    check::AnalysisInputs inputs;
    inputs.main = &take;
    inputs.common_mode = common_mode;
    for (auto _ : state) benchmark::DoNotOptimize(check::analyse(kind, inputs, {}));
}

void gain_1_s(benchmark::State& state) {
    analyse(state, "gain", taken(signal::Tone{997.0}, 1.0));
}
void response_3_s(benchmark::State& state) {
    analyse(state, "response", taken(signal::Sweep{10.0, 22000.0}, 3.0));
}
void noise_30_s(benchmark::State& state) {
    analyse(state, "noise", taken(signal::Silence{}, 30.0));
}
void hum_4_s(benchmark::State& state) {
    analyse(state, "hum", taken(signal::Silence{}, 4.0));
}
void cmrr_3_s(benchmark::State& state) {
    const auto take = taken(signal::Multitone{{85.0, 997.0, 9973.0}}, 3.0);
    analyse(state, "cmrr", take, &take);
}
void content_of_sweep_3_s(benchmark::State& state) {
    const auto take = taken(signal::Sweep{10.0, 22000.0}, 3.0);
    for (auto _ : state)
        benchmark::DoNotOptimize(
            rig::check_content(take.recording.channel(1), rate, *take.description.stimulus));
}

BENCHMARK(gain_1_s)->Unit(benchmark::kMillisecond);
BENCHMARK(response_3_s)->Unit(benchmark::kMillisecond);
BENCHMARK(noise_30_s)->Unit(benchmark::kMillisecond);
BENCHMARK(hum_4_s)->Unit(benchmark::kMillisecond);
BENCHMARK(cmrr_3_s)->Unit(benchmark::kMillisecond);
BENCHMARK(content_of_sweep_3_s)->Unit(benchmark::kMillisecond);

}  // namespace

BENCHMARK_MAIN();
