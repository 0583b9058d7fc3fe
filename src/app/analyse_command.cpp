#include <algorithm>
#include <filesystem>
#include <optional>
#include <string>
#include <vector>

#include <fmt/format.h>
#include <nlohmann/json.hpp>

#include "coldpin/check/analysis.h"
#include "coldpin/check/perform.h"
#include "coldpin/measure/findings_json.h"
#include "coldpin/profile/quantities.h"
#include "coldpin/records/run_folder.h"
#include "coldpin/report/sheet.h"
#include "coldpin/signal/wav.h"
#include "coldpin/units/error.h"

#include "commands.h"
#include "exit_status.h"
#include "terminal.h"

namespace coldpin::app {

namespace {

struct Words {
    std::string what;
    std::string file;
    std::string stimulus, differential, common_mode, leakage, interface_noise;
    std::string band;
    check::AnalysisOptions options;
    bool json = false;
};

measure::Band band_from(const std::string& text) {
    measure::Band band;
    const auto colon = text.find(':');
    try {
        std::size_t low_end = 0, high_end = 0;
        if (colon == std::string::npos) throw std::invalid_argument(text);
        band.low_hz = std::stod(text.substr(0, colon), &low_end);
        band.high_hz = std::stod(text.substr(colon + 1), &high_end);
        if (low_end != colon || high_end != text.size() - colon - 1) throw std::invalid_argument(text);
    } catch (const std::exception&) {
        throw UsageError(fmt::format("--band {}: expected LO:HI in Hz, such as 20:20000", text));
    }
    if (!(band.low_hz >= 0.0) || !(band.high_hz > band.low_hz) || band.high_hz > 1e6)
        throw UsageError(fmt::format("--band {}: the low end must lie below the high end, both in Hz", text));
    return band;
}

std::optional<check::DescribedRecording> load(const std::string& file) {
    if (file.empty()) return std::nullopt;
    check::DescribedRecording take;
    take.name = file;
    take.recording = signal::read_wav(file);
    if (auto description = signal::read_description(file)) take.description = *description;
    return take;
}

const check::DescribedRecording* pointer(const std::optional<check::DescribedRecording>& take) {
    return take ? &*take : nullptr;
}

int analyse_files(const Words& words) {
    const bool pair = words.what == "cmrr";
    if (pair && (words.differential.empty() || words.common_mode.empty()))
        throw UsageError("analyse cmrr needs --differential D.wav and --common-mode C.wav");
    if (!pair && words.file.empty())
        throw UsageError(
            fmt::format("analyse {} needs a recording: coldpin analyse {} FILE.wav", words.what, words.what));
    const auto main = load(pair ? words.differential : words.file);
    const auto common_mode = load(words.common_mode);
    const auto leakage = load(words.leakage);
    const auto idle = load(words.interface_noise);
    const auto stimulus = load(words.stimulus);
    check::AnalysisInputs inputs;
    inputs.main = pointer(main);
    inputs.common_mode = pointer(common_mode);
    inputs.leakage = pointer(leakage);
    inputs.interface_idle = pointer(idle);
    inputs.stimulus = pointer(stimulus);
    check::AnalysisOptions options = words.options;
    if (!words.band.empty()) options.band = band_from(words.band);
    const measure::Findings findings = check::analyse(words.what, inputs, options);
    print(words.json ? measure::to_json(findings).dump(2) + "\n"
                     : report::findings_text(findings, {colour_wanted(), terminal_width()}));
    return exit_passed;
}

int analyse_run(const Words& words) {
    check::Run run = records::load_run(words.what);
    const auto before = run.steps;
    check::analyse_again(run);
    const auto changed = [](const check::StepResult& a, const check::StepResult& b) {
        return !(a.findings == b.findings);
    };
    const bool same = std::equal(before.begin(), before.end(), run.steps.begin(), run.steps.end(),
                                 [&](const auto& a, const auto& b) { return !changed(a, b); });
    print(words.json ? records::run_to_json_text(run)
                     : report::sheet(run, {colour_wanted(), terminal_width()}));
    fmt::print(
        stderr, "{}\n",
        same ? "Analysed again from the recordings: every figure is the one the run holds."
             : "Analysed again from the recordings: figures differ from those the run holds; this is another "
               "version of the program, or the recordings were changed.");
    return exit_status(run.verdict);
}

}  // namespace

void add_analyse(CLI::App& program, Action& action) {
    auto words = std::make_shared<Words>();
    CLI::App* command =
        program.add_subcommand("analyse", "the same analysis on stored recordings, or on a whole run folder");
    command
        ->add_option("what", words->what,
                     "gain, response, noise, hum, cmrr, distortion, crosstalk, polarity or latency; or a run "
                     "folder")
        ->required()
        ->type_name("KIND|RUN-FOLDER");
    command->add_option("file", words->file, "the recording (for cmrr see --differential)")
        ->type_name("FILE.wav");
    auto& options = words->options;
    command->add_option("--channel", options.channel, "channel to analyse, from 1")->type_name("N");
    command->add_option("--reference-channel", options.reference_channel, "channel that holds what was sent")
        ->type_name("N");
    command
        ->add_option("--input-full-scale-dbu", options.input_full_scale_dbu,
                     "level of a 0 dBFS sine; without it levels come in dBFS")
        ->type_name("X");
    command->add_option("--band", words->band, "band in Hz, default 20:20000")->type_name("LO:HI");
    command->add_option("--frequency", options.frequencies_hz, "tone(s) in Hz; may be repeated")
        ->delimiter(',')
        ->type_name("F");
    command->add_option("--drive-dbu", options.drive_dbu, "level at the preamp's input (gain)")
        ->type_name("X");
    command->add_option("--differential", words->differential, "recording with differential drive (cmrr)")
        ->type_name("D.wav");
    command->add_option("--differential-drive-dbu", options.drive_dbu, "its level at the preamp's input")
        ->type_name("X");
    command->add_option("--common-mode", words->common_mode, "recording with common-mode drive (cmrr)")
        ->type_name("C.wav");
    command
        ->add_option("--common-mode-drive-dbu", options.common_mode_drive_dbu,
                     "its level at the preamp's input")
        ->type_name("Y");
    command
        ->add_option("--leakage", words->leakage,
                     "recording with the feed off, aligned with the common-mode one (cmrr)")
        ->type_name("L.wav");
    command->add_option("--driven-channel", options.driven_channel, "channel that was driven (crosstalk)")
        ->type_name("M");
    command->add_option("--stimulus", words->stimulus, "what was played")->type_name("S.wav");
    command
        ->add_option("--reference-frequency", options.reference_frequency_hz,
                     "where the response is 0 dB, default 997")
        ->type_name("F");
    command->add_option("--gain-db", options.gain_db, "the unit's gain, for input-referred levels")
        ->type_name("G");
    command->add_option("--source-ohms", options.source_ohms, "resistance across the input")->type_name("R");
    command->add_option("--temperature-c", options.temperature_c, "of the source, default 20")
        ->type_name("T");
    command
        ->add_option("--interface-noise", words->interface_noise,
                     "the interface alone, to be subtracted (noise)")
        ->type_name("IDLE.wav");
    command->add_option("--mains", options.mains_hz, "mains frequency to look near (hum)")->type_name("F");
    command->add_flag("--json", words->json, "one JSON document on standard output and nothing else");
    command->footer(
        "Examples:\n"
        "  coldpin analyse noise idle.wav --input-full-scale-dbu 18 --gain-db 60 --source-ohms 150\n"
        "  coldpin analyse gain tone.wav --frequency 997 --drive-dbu -40 --input-full-scale-dbu 18\n"
        "  coldpin analyse cmrr --differential d.wav --differential-drive-dbu -40 --common-mode c.wav "
        "--common-mode-drive-dbu 0 --frequency 997\n"
        "  coldpin analyse runs/2026-05-04T090307Z_0042");
    command->callback([words, &action] {
        action = [words] {
            const auto& kinds = profile::analysis_kinds();
            if (std::find(kinds.begin(), kinds.end(), words->what) != kinds.end())
                return analyse_files(*words);
            if (std::filesystem::exists(words->what)) return analyse_run(*words);
            std::vector<std::string_view> candidates(kinds.begin(), kinds.end());
            const std::string near = profile::nearest_word(words->what, candidates);
            throw UsageError(fmt::format("'{}' is neither a kind of analysis ({}) nor a run folder{}",
                                         words->what, fmt::join(kinds, ", "),
                                         near.empty() ? "" : ": did you mean " + near + "?"));
        };
    });
}

}  // namespace coldpin::app
