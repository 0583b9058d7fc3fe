// Audio libraries chatter on stderr while they look for devices; a program that owns the terminal keeps
// quiet.
#pragma once

namespace coldpin::rig {

// While one lives, stderr goes nowhere. Not for two threads at once.
class StderrSilencer {
  public:
    StderrSilencer();
    ~StderrSilencer();
    StderrSilencer(const StderrSilencer&) = delete;
    StderrSilencer& operator=(const StderrSilencer&) = delete;

    // Gives stderr back although a silencer still lives, in a thread that was left behind: the last words of
    // the program must be heard.
    static void lift() noexcept;

  private:
    int kept_ = -1;
};

}  // namespace coldpin::rig
