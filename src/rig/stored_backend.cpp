// Takes that were recorded before, by label.
#include <cmath>

#include <fmt/core.h>

#include "coldpin/signal/wav.h"
#include "coldpin/units/error.h"

#include "backends.h"

namespace coldpin::rig {

namespace {

class StoredBackend : public Backend {
  public:
    explicit StoredBackend(const Setup& setup) : folder_(setup.stored_folder) {
        if (!std::filesystem::is_directory(folder_))
            throw UsageError(fmt::format("the stored rig's folder {} does not exist", folder_.string()));
    }

    Take play_and_record(const TakeRequest& request, const std::atomic<bool>*) override {
        const auto file = folder_ / (request.label + ".wav");
        const signal::Recording recording = signal::read_wav(file);
        if (recording.rate_hz != request.rate_hz)
            throw UsageError(fmt::format("{}: is at {:g} Hz, the rig at {:g} Hz", file.string(),
                                         recording.rate_hz, request.rate_hz));
        if (recording.channels.size() < static_cast<std::size_t>(request.input_channels))
            throw UsageError(fmt::format("{}: has {} channel(s), the rig records {}", file.string(),
                                         recording.channels.size(), request.input_channels));
        Take take;
        for (int c = 0; c < request.input_channels; ++c) {
            const auto& channel = recording.channels[static_cast<std::size_t>(c)];
            std::vector<float> samples(channel.size());
            for (std::size_t n = 0; n < samples.size(); ++n) samples[n] = static_cast<float>(channel[n]);
            take.recorded.push_back(std::move(samples));
        }
        return take;
    }
    bool rewire(const Wiring&) override { return true; }
    std::string description() const override { return "stored takes in " + folder_.filename().string(); }

  private:
    std::filesystem::path folder_;
};

}  // namespace

std::unique_ptr<Backend> make_stored_backend(const Setup& setup) {
    return std::make_unique<StoredBackend>(setup);
}

}  // namespace coldpin::rig
