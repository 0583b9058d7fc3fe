// Small text files, whole: read at once, written under a temporary name and renamed.
#pragma once

#include <filesystem>
#include <string>

namespace coldpin::signal {

// Throws UsageError naming the file and the reason.
std::string read_text_file(const std::filesystem::path& file);

// Flushes to the disk before renaming, so that the final name never holds half a text. Throws UsageError
// naming the file (folder missing, unwritable, disk full) and removes the temporary.
void write_text_file(const std::filesystem::path& file, const std::string& text);

}  // namespace coldpin::signal
