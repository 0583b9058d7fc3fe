// Writing into a rig file what a program found out, and leaving the rest of the text as its owner wrote it.
#pragma once

#include <filesystem>
#include <string>

#include "coldpin/rig/setup.h"

namespace coldpin::profile {

// The text with the table of that name (such as "calibration" or "fixtures.head") replaced by `body` (its
// lines, without the header), or appended when there is none. Comments inside the replaced table go with it;
// everything else stays. Tables below it ("calibration.loop") go too.
std::string with_table(const std::string& text, const std::string& name, const std::string& body);

// The name of the fixture in use: fixture = "NAME", or the only [fixtures.NAME]. Throws as rig_from_text().
std::string fixture_in_use(const std::string& text, const std::string& source_name);

// The lines of a [fixtures.NAME] and of a [calibration].
std::string fixture_lines(const rig::Fixture& fixture);
std::string calibration_lines(const rig::Calibration& calibration);

// Reads the text as a rig file (so that nothing unreadable is ever written), then replaces the file at once.
// Throws UsageError, leaving the old file as it is: a read-only file, a full disk, a text that is no rig.
void replace_rig_file(const std::filesystem::path& file, const std::string& text);

// Only asks whether replace_rig_file() could: before an hour of work, not after it. Throws UsageError.
void require_writable(const std::filesystem::path& file);

}  // namespace coldpin::profile
