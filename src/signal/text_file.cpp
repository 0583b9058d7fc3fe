#include "coldpin/signal/text_file.h"

#include <cerrno>
#include <cstdio>
#include <cstring>
#include <memory>
#include <system_error>

#include <fmt/core.h>

#include "coldpin/units/error.h"

#include "safe_file.h"

namespace coldpin::signal {

namespace {

struct CloseFile {
    void operator()(std::FILE* file) const { std::fclose(file); }
};
using File = std::unique_ptr<std::FILE, CloseFile>;

}  // namespace

std::string read_text_file(const std::filesystem::path& file) {
    std::error_code error;
    if (std::filesystem::is_directory(file, error))
        throw UsageError(fmt::format("{}: is a folder, expected a file", file.string()));
    File in(std::fopen(file.string().c_str(), "rb"));
    if (!in) throw UsageError(fmt::format("{}: cannot be opened: {}", file.string(), std::strerror(errno)));
    std::string text;
    char block[65536];
    std::size_t got = 0;
    while ((got = std::fread(block, 1, sizeof block, in.get())) > 0) text.append(block, got);
    if (std::ferror(in.get()) != 0) throw UsageError(fmt::format("{}: cannot be read", file.string()));
    return text;
}

void write_text_file(const std::filesystem::path& file, const std::string& text) {
    write_then_rename(file, [&](const std::filesystem::path& temporary) {
        File out(std::fopen(temporary.string().c_str(), "wb"));
        if (!out)
            throw UsageError(fmt::format("{}: cannot be written: {}", file.string(), std::strerror(errno)));
        const bool written = std::fwrite(text.data(), 1, text.size(), out.get()) == text.size();
        const bool flushed = std::fflush(out.get()) == 0;
        const int reason = errno;
        const bool closed = std::fclose(out.release()) == 0;
        if (!written || !flushed || !closed)
            throw UsageError(fmt::format("{}: could not be written whole ({}): is the disk full?",
                                         file.string(), std::strerror(reason)));
    });
}

}  // namespace coldpin::signal
