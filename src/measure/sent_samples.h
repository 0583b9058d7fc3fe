// What was sent: the reference channel if there is one, else the stimulus rendered from its description, else
// its samples.
#pragma once

#include <optional>
#include <span>
#include <vector>

#include "coldpin/measure/transfer.h"
#include "coldpin/signal/stimulus.h"

namespace coldpin::measure {

// Owns rendered samples for as long as the question that refers to them lives.
class SentSamples {
  public:
    // Throws UsageError when nothing says what was sent, or rates differ.
    SentSamples(std::span<const double> recording, double rate_hz,
                const std::optional<signal::Stimulus>& stimulus, std::span<const double> samples,
                std::span<const double> reference);
    const TransferQuestion& question() const { return question_; }
    TransferQuestion& question() { return question_; }
    SentSamples(const SentSamples&) = delete;
    SentSamples& operator=(const SentSamples&) = delete;

  private:
    std::vector<double> rendered_;
    TransferQuestion question_;
};

}  // namespace coldpin::measure
