#include <string>

#include <fmt/core.h>

#include "coldpin/records/run_folder.h"
#include "coldpin/report/html.h"
#include "coldpin/report/sheet.h"
#include "coldpin/signal/text_file.h"

#include "commands.h"
#include "exit_status.h"
#include "terminal.h"

namespace coldpin::app {

void add_report(CLI::App& program, Action& action) {
    struct Words {
        std::string folder;
        std::string html;
        bool json = false;
    };
    auto words = std::make_shared<Words>();
    CLI::App* command =
        program.add_subcommand("report", "the sheet of a kept run; optionally its HTML report anew");
    command->add_option("folder", words->folder, "run folder")->required()->type_name("RUN-FOLDER");
    command->add_option("--html", words->html, "write the HTML report there")->type_name("FILE.html");
    command->add_flag("--json", words->json, "run.json on standard output and nothing else");
    command->footer("Example:\n  coldpin report runs/2026-05-04T090307Z_0042 --html sheet.html");
    command->callback([words, &action] {
        action = [words] {
            const check::Run run = records::load_run(words->folder);
            if (!words->html.empty()) signal::write_text_file(words->html, report::html(run));
            print(words->json ? records::run_to_json_text(run)
                              : report::sheet(run, {colour_wanted(), terminal_width()}));
            return exit_passed;
        };
    });
}

}  // namespace coldpin::app
