// Runs the real program as a user would and keeps what it said.
#pragma once

#include <filesystem>
#include <string>
#include <vector>

namespace coldpin::tests {

struct Outcome {
    int status = -1;  // exit status; 128 + signal when it was ended by one
    std::string out;
    std::string err;
    double wall_s = 0.0;
};

// Arguments as a shell would take them (quote them yourself); runs in `folder`. `before` goes in front of the
// program's name, such as "ulimit -f 4;". The program is killed after 60 s (status 137).
Outcome run_coldpin(const std::string& arguments, const std::filesystem::path& folder,
                    const std::string& before = "");

// A fresh folder that goes with the test.
class TemporaryFolder {
  public:
    TemporaryFolder();
    ~TemporaryFolder();
    TemporaryFolder(const TemporaryFolder&) = delete;
    TemporaryFolder& operator=(const TemporaryFolder&) = delete;
    const std::filesystem::path& path() const { return path_; }

  private:
    std::filesystem::path path_;
};

}  // namespace coldpin::tests
