// Runs on disk: run.json, recordings/*.wav + *.json, and whatever else is given (the report).
#pragma once

#include <filesystem>
#include <map>
#include <string>

#include "coldpin/check/run.h"

namespace coldpin::records {

// Writes under a temporary name ("NAME.unfinished") and renames the folder when complete. Returns the folder:
// `parent`/TIME_SERIAL, made unique by a number. Throws UsageError (unwritable, disk full), leaving nothing
// under a final name. `files`: name -> text, written into the folder ("report.html").
std::filesystem::path save_run(const check::Run& run, const std::filesystem::path& parent,
                               const std::map<std::string, std::string>& files);

// Throws UsageError naming what is missing or broken: no run.json, unfinished, a recording gone or changed.
check::Run load_run(const std::filesystem::path& folder);

// run.json's text (schema "coldpin-run/1"), recordings by file name.
std::string run_to_json_text(const check::Run& run);

}  // namespace coldpin::records
