// WAV files in and out (libsndfile).
#pragma once

#include <filesystem>

#include "coldpin/signal/recording.h"

namespace coldpin::signal {

// Reads any sound file libsndfile knows; integer formats are scaled so that full scale is 1.0. Throws
// UsageError naming the file when it is missing, empty, not a sound file, truncated (fewer frames than its
// header promises), without frames, or holds a value that is not finite.
Recording read_wav(const std::filesystem::path& file);

// Writes float32, RF64 where a plain WAV would be too long. Samples that came from float32 keep their bits.
// Writes under a temporary name beside the file and renames it when complete; on failure (folder missing or
// unwritable, disk full) throws UsageError naming the file and leaves nothing behind.
void write_wav(const std::filesystem::path& file, const Recording& recording);

}  // namespace coldpin::signal
