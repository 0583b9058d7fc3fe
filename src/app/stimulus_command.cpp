#include <filesystem>
#include <vector>

#include <fmt/core.h>

#include "coldpin/signal/description.h"
#include "coldpin/signal/stimulus.h"
#include "coldpin/signal/wav.h"
#include "coldpin/units/error.h"
#include "coldpin/units/frequency_grid.h"

#include "commands.h"
#include "exit_status.h"

namespace coldpin::app {

namespace {

struct Words {
    double frequency_hz = 997.0;
    std::vector<double> frequencies_hz;
    double from_hz = 20.0;
    double to_hz = 20000.0;
    int per_octave = 3;
    int cycles = 5;
    double length_s = 1.0;
    double level_dbfs = -20.0;
    double rate_hz = 48000.0;
    std::string out;
};

int write_stimulus(const signal::StimulusKind& kind, const Words& words) {
    signal::Stimulus stimulus;
    stimulus.kind = kind;
    stimulus.length_s = words.length_s;
    stimulus.level_dbfs = words.level_dbfs;
    stimulus.rate_hz = words.rate_hz;
    signal::Recording recording;
    recording.rate_hz = words.rate_hz;
    recording.channels.push_back(signal::render(stimulus));
    signal::Description description;
    description.stimulus = stimulus;
    signal::write_wav(words.out, recording);
    signal::write_description(words.out, description);
    fmt::print(stderr, "{}: {} frames at {:g} Hz, description in {}\n", words.out, recording.frames(),
               words.rate_hz, signal::description_path(words.out).string());
    return exit_passed;
}

void add_shared(CLI::App* kind, Words& words, bool with_level = true) {
    kind->add_option("--seconds", words.length_s, "length")->required()->type_name("T");
    auto* level =
        kind->add_option("--level-dbfs", words.level_dbfs, "level; a sine that reaches full scale is 0 dBFS")
            ->type_name("L");
    if (with_level) level->required();
    kind->add_option("--rate", words.rate_hz, "sample rate in Hz")->capture_default_str()->type_name("R");
    kind->add_option("--out", words.out, "file to write; its description goes beside it")
        ->required()
        ->type_name("FILE.wav");
}

}  // namespace

void add_stimulus(CLI::App& program, Action& action) {
    auto words = std::make_shared<Words>();
    CLI::App* command =
        program.add_subcommand("stimulus", "render a stimulus to a WAV file, with its description beside it");
    command->require_subcommand(1);
    command->footer(
        "Example:\n  coldpin stimulus sweep --from 10 --to 22000 --seconds 5 --level-dbfs -12 --rate 48000 "
        "--out sweep.wav");

    CLI::App* tone = command->add_subcommand("tone", "one sine");
    tone->add_option("--frequency", words->frequency_hz, "in Hz")->required()->type_name("F");
    add_shared(tone, *words);
    tone->callback([words, &action] {
        action = [words] { return write_stimulus(signal::Tone{words->frequency_hz}, *words); };
    });
    tone->footer(
        "Example:\n  coldpin stimulus tone --frequency 997 --seconds 2 --level-dbfs -20 --out tone.wav");

    CLI::App* multitone =
        command->add_subcommand("multitone", "many sines at once, low crest factor; level is the RMS of all");
    auto* list = multitone->add_option("--frequencies", words->frequencies_hz, "in Hz, separated by commas")
                     ->delimiter(',')
                     ->type_name("F,F,...");
    auto* from =
        multitone->add_option("--from", words->from_hz, "lowest frequency")->type_name("F")->excludes(list);
    auto* to =
        multitone->add_option("--to", words->to_hz, "highest frequency")->type_name("F")->excludes(list);
    auto* per = multitone->add_option("--per-octave", words->per_octave, "tones an octave")
                    ->type_name("N")
                    ->excludes(list);
    add_shared(multitone, *words);
    multitone->callback([words, &action, list, from, to, per] {
        const bool grid = from->count() + to->count() + per->count() > 0;
        if (!grid && list->count() == 0)
            throw UsageError("a multitone needs --frequencies F,F,... or --from, --to and --per-octave");
        action = [words, grid] {
            signal::Multitone kind{
                grid ? units::logarithmic_grid(words->from_hz, words->to_hz, words->per_octave)
                     : words->frequencies_hz};
            return write_stimulus(kind, *words);
        };
    });
    multitone->footer(
        "Example:\n  coldpin stimulus multitone --from 20 --to 20000 --per-octave 3 --seconds 4 --level-dbfs "
        "-20 --out many.wav");

    CLI::App* sweep = command->add_subcommand("sweep", "synchronised exponential sweep");
    sweep->add_option("--from", words->from_hz, "first frequency in Hz")->required()->type_name("F");
    sweep->add_option("--to", words->to_hz, "last frequency in Hz")->required()->type_name("F");
    add_shared(sweep, *words);
    sweep->callback([words, &action] {
        action = [words] { return write_stimulus(signal::Sweep{words->from_hz, words->to_hz}, *words); };
    });
    sweep->footer(
        "Example:\n  coldpin stimulus sweep --from 10 --to 22000 --seconds 5 --level-dbfs -12 --out "
        "sweep.wav");

    CLI::App* silence = command->add_subcommand("silence", "nothing, for noise and hum");
    add_shared(silence, *words, false);
    silence->callback(
        [words, &action] { action = [words] { return write_stimulus(signal::Silence{}, *words); }; });
    silence->footer("Example:\n  coldpin stimulus silence --seconds 10 --out silence.wav");

    CLI::App* burst = command->add_subcommand("burst", "whole cycles of a sine, then silence");
    burst->add_option("--frequency", words->frequency_hz, "in Hz")->required()->type_name("F");
    burst->add_option("--cycles", words->cycles, "whole cycles")->required()->type_name("N");
    add_shared(burst, *words);
    burst->callback([words, &action] {
        action = [words] {
            return write_stimulus(signal::Burst{words->frequency_hz, words->cycles}, *words);
        };
    });
    burst->footer(
        "Example:\n  coldpin stimulus burst --frequency 5000 --cycles 25 --seconds 1 --level-dbfs -6 --out "
        "burst.wav");
}

}  // namespace coldpin::app
