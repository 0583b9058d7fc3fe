// A tone in the background while someone reads a meter.
#pragma once

#include <atomic>
#include <exception>
#include <thread>

#include "coldpin/rig/session.h"

namespace coldpin::check {

// Nothing else may use the session while it lives; finish() passes on what went wrong.
class TonePlayer {
  public:
    TonePlayer(rig::Session& session, int output, double frequency_hz, double level_dbfs)
        : thread_([this, &session, output, frequency_hz, level_dbfs] {
              try {
                  session.play_tone_until(stop_, output, frequency_hz, level_dbfs);
              } catch (...) {
                  failure_ = std::current_exception();
              }
          }) {}
    ~TonePlayer() {
        stop_ = true;
        if (thread_.joinable()) thread_.join();
    }
    TonePlayer(const TonePlayer&) = delete;
    TonePlayer& operator=(const TonePlayer&) = delete;
    void finish() {
        stop_ = true;
        thread_.join();
        if (failure_) std::rethrow_exception(failure_);
    }

  private:
    std::atomic<bool> stop_{false};
    std::exception_ptr failure_;
    std::thread thread_;
};

}  // namespace coldpin::check
