#include "coldpin/records/run_folder.h"

#include <cctype>
#include <system_error>

#include <fmt/core.h>
#include <nlohmann/json.hpp>

#include "coldpin/signal/text_file.h"
#include "coldpin/signal/wav.h"
#include "coldpin/units/error.h"

#include "run_json.h"

namespace coldpin::records {

namespace {

namespace fs = std::filesystem;
constexpr const char* unfinished = ".unfinished";

// Letters, digits, dots and dashes; what else a serial number may hold must not leave the folder.
std::string file_safe(const std::string& text) {
    std::string out;
    for (char c : text.substr(0, 60)) {
        const bool plain = std::isalnum(static_cast<unsigned char>(c)) != 0 || c == '-' || c == '.';
        out += plain ? c : '_';
    }
    return out.find_first_not_of('.') == std::string::npos ? std::string(out.size(), '_') : out;
}

std::string base_name(const check::Run& run) {
    std::string time;
    for (char c : run.time_utc)
        if (c != ':') time += c;
    return file_safe(time) + (run.serial.empty() ? "" : "_" + file_safe(run.serial));
}

fs::path free_name(const fs::path& parent, const std::string& base) {
    for (int number = 1;; ++number) {
        fs::path candidate = parent / (number == 1 ? base : fmt::format("{}-{}", base, number));
        fs::path marked = candidate;
        marked += unfinished;
        if (!fs::exists(candidate) && !fs::exists(marked)) return candidate;
    }
}

void make_folder(const fs::path& folder) {
    std::error_code error;
    fs::create_directories(folder, error);
    if (error || !fs::is_directory(folder))
        throw UsageError(fmt::format("{}: the folder cannot be made: {}", folder.string(),
                                     error ? error.message() : "a file is in its place"));
}

}  // namespace

fs::path save_run(const check::Run& run, const fs::path& parent,
                  const std::map<std::string, std::string>& files) {
    make_folder(parent);
    fs::path folder = free_name(parent, base_name(run));
    fs::path temporary = folder;
    temporary += unfinished;
    try {
        make_folder(temporary / "recordings");
        for (const auto& capture : run.captures) {
            const fs::path file = temporary / "recordings" / (capture.take.name + ".wav");
            signal::write_wav(file, capture.take.recording);
            signal::write_description(file, capture.take.description);
        }
        for (const auto& [name, text] : files) signal::write_text_file(temporary / name, text);
        signal::write_text_file(temporary / "run.json", run_to_json_text(run));
        std::error_code error;
        fs::rename(temporary, folder, error);
        if (error)
            throw UsageError(
                fmt::format("{}: could not be put in place: {}", folder.string(), error.message()));
    } catch (...) {
        std::error_code ignored;
        fs::remove_all(temporary, ignored);
        throw;
    }
    return folder;
}

check::Run load_run(const fs::path& folder) {
    if (!fs::is_directory(folder)) throw UsageError(fmt::format("{}: is no run folder", folder.string()));
    fs::path trimmed = folder;
    if (!trimmed.has_filename()) trimmed = trimmed.parent_path();
    if (trimmed.extension() == unfinished)
        throw UsageError(fmt::format("{}: this run was never finished; measure again", folder.string()));
    const fs::path file = folder / "run.json";
    if (!fs::exists(file))
        throw UsageError(fmt::format("{}: holds no run.json, so it is no run folder", folder.string()));
    const std::string text = signal::read_text_file(file);
    check::Run run = run_from_json(text, file.string());
    const auto listed = nlohmann::ordered_json::parse(text).at("captures");
    for (std::size_t i = 0; i < run.captures.size(); ++i) {
        auto& take = run.captures[i].take;
        const fs::path wav = folder / "recordings" / (take.name + ".wav");
        take.recording = signal::read_wav(wav);
        const auto description = signal::read_description(wav);
        if (!description) throw UsageError(fmt::format("{}: its description is gone", wav.string()));
        take.description = *description;
        const auto frames = listed.at(i).value("frames", std::size_t{0});
        if (frames != take.recording.frames())
            throw UsageError(
                fmt::format("{}: has {} frames, the run was measured from {}: the recording was changed",
                            wav.string(), take.recording.frames(), frames));
    }
    return run;
}

}  // namespace coldpin::records
