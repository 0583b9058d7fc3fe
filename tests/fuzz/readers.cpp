#include "readers.h"

#include <algorithm>
#include <filesystem>
#include <fstream>
#include <iterator>

#include <nlohmann/json.hpp>

#include "coldpin/measure/findings_json.h"
#include "coldpin/profile/device_profile.h"
#include "coldpin/profile/rig_file.h"
#include "coldpin/signal/description.h"
#include "coldpin/signal/wav.h"
#include "coldpin/units/error.h"

namespace coldpin::tests {

namespace {

std::string bytes_of(const std::filesystem::path& file) {
    std::ifstream stream(file, std::ios::binary);
    return {std::istreambuf_iterator<char>(stream), {}};
}

std::vector<std::string> files_under(const std::string& folder, const std::string& extension,
                                     std::size_t most_bytes) {
    std::vector<std::filesystem::path> found;
    for (const auto& entry : std::filesystem::directory_iterator(std::string(COLDPIN_SOURCE_DIR) + folder))
        if (entry.path().extension() == extension) found.push_back(entry.path());
    std::sort(found.begin(), found.end());
    std::vector<std::string> texts;
    for (const auto& file : found) texts.push_back(bytes_of(file).substr(0, most_bytes));
    return texts;
}

void read_sound(const std::string& bytes) {
    const auto file = std::filesystem::temp_directory_path() / "coldpin-fuzz.wav";
    std::ofstream(file, std::ios::binary) << bytes;
    try {
        signal::read_wav(file);
    } catch (...) {
        std::filesystem::remove(file);
        throw;
    }
    std::filesystem::remove(file);
}

void read_findings(const std::string& bytes) {
    const auto json = nlohmann::ordered_json::parse(bytes, nullptr, false);
    if (!json.is_discarded()) measure::findings_from_json(json, "findings.json");
}

constexpr const char* findings_seed =
    R"({"schema":"coldpin-findings/1","kind":"gain","figures":[{"quantity":"gain","value":40.0,"unit":"dB",)"
    R"("uncertainty":0.1,"coverage_factor":2.0,"bound":"exact","conditions":{"frequency_hz":997.0}}],)"
    R"("curves":[],"cautions":["word"]})";

}  // namespace

const std::vector<Reader>& readers() {
    static const std::vector<Reader> all = {
        {"device profile",
         [](const std::string& bytes) { profile::device_profile_from_text(bytes, "fuzz.toml"); },
         files_under("/profiles/devices", ".toml", 1U << 20)},
        {"rig file", [](const std::string& bytes) { profile::rig_from_text(bytes, "fuzz.toml"); },
         files_under("/profiles/rigs", ".toml", 1U << 20)},
        {"description",
         [](const std::string& bytes) { signal::description_from_json_text(bytes, "fuzz.json"); },
         files_under("/tests/recordings", ".json", 1U << 20)},
        {"findings", read_findings, {findings_seed}},
        {"sound file", read_sound, files_under("/tests/recordings", ".wav", 4000)},
    };
    return all;
}

void read_or_refuse(const Reader& reader, const std::string& bytes) {
    try {
        reader.read(bytes);
    } catch (const Error&) {  // refused
    }
}

}  // namespace coldpin::tests
