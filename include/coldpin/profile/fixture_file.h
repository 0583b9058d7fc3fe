// Fixture files: TOML, schema "coldpin-fixture/1": a fixture by its resistors.
#pragma once

#include <filesystem>
#include <string>

#include "coldpin/rig/fixture_parts.h"

namespace coldpin::profile {

// Throw UsageError "file:line:column: in [table] key: found X, expected Y" as the other readers do, and for
// parts that cannot be (rig::fixture_figures). Any thread.
rig::FixtureParts read_fixture(const std::filesystem::path& file);
rig::FixtureParts fixture_from_text(const std::string& text, const std::string& source_name);

}  // namespace coldpin::profile
