#include "safe_file.h"

#include <atomic>
#include <random>
#include <system_error>

#include <fmt/core.h>

#include "coldpin/units/error.h"

namespace coldpin::signal {

namespace {

// Two programs may write into one folder at once; the name only has to differ.
std::string temporary_suffix() {
    static std::atomic<unsigned> count{0};
    static const unsigned salt = std::random_device{}();
    return fmt::format(".{:08x}{:x}.part", salt, count++);
}

}  // namespace

void write_then_rename(const std::filesystem::path& file,
                       const std::function<void(const std::filesystem::path&)>& write) {
    namespace fs = std::filesystem;
    std::error_code error;
    if (file.filename().empty() || fs::is_directory(file, error))
        throw UsageError(fmt::format("{}: is a folder, expected a file to write", file.string()));
    const fs::path folder = file.has_parent_path() ? file.parent_path() : fs::path(".");
    if (!fs::is_directory(folder, error))
        throw UsageError(fmt::format("{}: the folder {} does not exist", file.string(), folder.string()));
    fs::path temporary = file;
    temporary += temporary_suffix();
    try {
        write(temporary);
        fs::rename(temporary, file, error);
        if (error)
            throw UsageError(
                fmt::format("{}: could not be put in place: {}", file.string(), error.message()));
    } catch (...) {
        std::error_code ignored;
        fs::remove(temporary, ignored);
        throw;
    }
}

}  // namespace coldpin::signal
