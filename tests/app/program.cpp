#include "program.h"

#include <chrono>
#include <cstdlib>
#include <fstream>
#include <sstream>
#include <stdexcept>

#include <stdlib.h>
#include <sys/wait.h>

namespace coldpin::tests {

namespace {

std::string text_of(const std::filesystem::path& file) {
    std::ifstream in(file, std::ios::binary);
    std::ostringstream text;
    text << in.rdbuf();
    return text.str();
}

}  // namespace

Outcome run_coldpin(const std::string& arguments, const std::filesystem::path& folder,
                    const std::string& before) {
    TemporaryFolder said;
    const std::string command = "cd '" + folder.string() + "' && { " + before +
                                " timeout -s KILL 60 '" COLDPIN_PROGRAM "' " + arguments + "; } >'" +
                                (said.path() / "out").string() + "' 2>'" + (said.path() / "err").string() +
                                "' </dev/null";
    const auto begin = std::chrono::steady_clock::now();
    const int raw = std::system(command.c_str());
    Outcome outcome;
    outcome.wall_s = std::chrono::duration<double>(std::chrono::steady_clock::now() - begin).count();
    outcome.status = WIFEXITED(raw) ? WEXITSTATUS(raw) : 128 + WTERMSIG(raw);
    outcome.out = text_of(said.path() / "out");
    outcome.err = text_of(said.path() / "err");
    return outcome;
}

TemporaryFolder::TemporaryFolder() {
    std::string pattern = (std::filesystem::temp_directory_path() / "coldpin-test-XXXXXX").string();
    if (mkdtemp(pattern.data()) == nullptr) throw std::runtime_error("no temporary folder");
    path_ = pattern;
}

TemporaryFolder::~TemporaryFolder() {
    std::error_code ignored;
    std::filesystem::remove_all(path_, ignored);
}

}  // namespace coldpin::tests
