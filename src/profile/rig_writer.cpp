#include "coldpin/profile/rig_writer.h"

#include <system_error>
#include <vector>

#include <fmt/core.h>

#include "coldpin/profile/rig_file.h"
#include "coldpin/signal/text_file.h"
#include "coldpin/units/error.h"

#include "toml_text.h"

namespace coldpin::profile {

namespace {

std::vector<std::string> lines_of(const std::string& text) {
    std::vector<std::string> lines;
    std::size_t begin = 0;
    while (begin < text.size()) {
        const auto end = text.find('\n', begin);
        lines.push_back(text.substr(begin, end - begin));
        if (end == std::string::npos) break;
        begin = end + 1;
    }
    return lines;
}

// The name in "[ name ]" with its spaces taken out; empty for other lines. (A header in a multi-line string
// would be taken for one; the result is read again before it is written, so that could only be refused.)
std::string header_of(const std::string& line) {
    const auto first = line.find_first_not_of(" \t");
    if (first == std::string::npos || line[first] != '[') return "";
    const auto end = line.find(']', first);
    if (end == std::string::npos) return "";
    std::string name;
    for (char c : line.substr(first + 1, end - first - 1))
        if (c != ' ' && c != '\t' && c != '[' && c != '"') name += c;
    return name;
}

}  // namespace

std::string with_table(const std::string& text, const std::string& name, const std::string& body) {
    std::string out;
    bool inside = false, placed = false;
    const auto place = [&] {
        out += "[" + name + "]\n" + body;
        placed = true;
    };
    std::vector<std::string> kept;  // blank lines and comments just before the next header belong to that one
    const auto flush = [&] {
        for (const auto& line : kept) out += line + "\n";
        kept.clear();
    };
    for (const std::string& line : lines_of(text)) {
        const std::string header = header_of(line);
        if (!header.empty()) {
            const bool ours = header == name || header.rfind(name + ".", 0) == 0;
            if (ours && !inside) flush();
            if (ours) {
                kept.clear();
                if (!placed) place();
                inside = true;
                continue;
            }
            if (inside) out += "\n";
            flush();
            inside = false;
        }
        if (!inside) {
            out += line + "\n";
            continue;
        }
        const auto first = line.find_first_not_of(" \t\r");
        if (first == std::string::npos || line[first] == '#') {
            if (first != std::string::npos || !kept.empty()) kept.push_back(line);
        } else {
            kept.clear();
        }
    }
    if (!inside) flush();
    if (!placed) {
        if (!out.empty() && out.back() != '\n') out += "\n";
        out += "\n";
        place();
    }
    return out;
}

std::string fixture_in_use(const std::string& text, const std::string& source_name) {
    return rig_from_text(text, source_name).setup.fixture_key;
}

std::string fixture_lines(const rig::Fixture& fixture) {
    std::string out = fmt::format("name = {}\n", quoted(fixture.name));
    out += fmt::format("differential_loss_db = {:.4f}\n", fixture.differential_loss_db);
    out +=
        fmt::format("differential_loss_uncertainty_db = {:.4f}\n", fixture.differential_loss_uncertainty_db);
    out += fmt::format("common_mode_loss_db = {:.4f}\n", fixture.common_mode_loss_db);
    out += fmt::format("common_mode_loss_uncertainty_db = {:.4f}\n", fixture.common_mode_loss_uncertainty_db);
    out += fmt::format("source_ohms = {:.3f}\n", fixture.source_ohms);
    if (fixture.rejection_limit_db)
        out += fmt::format("rejection_limit_db = {:.2f}\n", *fixture.rejection_limit_db);
    return out;
}

std::string calibration_lines(const rig::Calibration& calibration) {
    std::string out;
    const auto number = [&](const char* key, const std::optional<double>& value, int digits) {
        if (value) out += fmt::format("{} = {:.{}f}\n", key, *value, digits);
    };
    out += fmt::format("time_utc = {}\n", quoted(calibration.time_utc));
    number("output_full_scale_dbu", calibration.output_full_scale_dbu, 4);
    number("output_uncertainty_db", calibration.output_uncertainty_db, 4);
    number("common_mode_output_full_scale_dbu", calibration.common_mode_output_full_scale_dbu, 4);
    number("input_full_scale_dbu", calibration.input_full_scale_dbu, 4);
    number("input_uncertainty_db", calibration.input_uncertainty_db, 4);
    number("reference_full_scale_dbu", calibration.reference_full_scale_dbu, 4);
    number("loop_latency_frames", calibration.loop_latency_frames, 3);
    number("loop_noise_dbfs", calibration.loop_noise_dbfs, 2);
    number("loop_distortion_db", calibration.loop_distortion_db, 2);
    number("loop_deviation_db", calibration.loop_deviation_db, 3);
    number("loop_crosstalk_db", calibration.loop_crosstalk_db, 1);
    number("loop_dc", calibration.loop_dc, 7);
    if (!calibration.knobs.empty()) out += fmt::format("knobs = {}\n", quoted(calibration.knobs));
    if (!calibration.meter.empty()) out += fmt::format("meter = {}\n", quoted(calibration.meter));
    if (!calibration.remark.empty()) out += fmt::format("remark = {}\n", quoted(calibration.remark));
    return out;
}

void require_writable(const std::filesystem::path& file) {
    namespace fs = std::filesystem;
    std::error_code error;
    const auto status = fs::status(file, error);
    if (error || !fs::is_regular_file(status))
        throw UsageError(fmt::format("{}: there is no such rig file to write into", file.string()));
    if ((status.permissions() & fs::perms::owner_write) == fs::perms::none)
        throw UsageError(fmt::format(
            "{}: is read-only, so nothing can be written into it: make it writable, or work on a copy",
            file.string()));
}

void replace_rig_file(const std::filesystem::path& file, const std::string& text) {
    require_writable(file);
    rig_from_text(text, file.string());
    const auto permissions = std::filesystem::status(file).permissions();
    signal::write_text_file(file, text);
    std::error_code ignored;
    std::filesystem::permissions(file, permissions, ignored);
}

}  // namespace coldpin::profile
