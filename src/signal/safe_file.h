// Writing beside the final name and renaming: a file is there whole or not at all.
#pragma once

#include <filesystem>
#include <functional>

namespace coldpin::signal {

// Calls `write` with a temporary path in the same folder, then renames it to `file`. When either throws or
// fails the temporary is removed and the exception passes (a failed rename becomes UsageError). A missing or
// unfit folder is reported before `write` is called.
void write_then_rename(const std::filesystem::path& file,
                       const std::function<void(const std::filesystem::path&)>& write);

}  // namespace coldpin::signal
