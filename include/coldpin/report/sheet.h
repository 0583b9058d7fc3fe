// A run as a test sheet for a terminal or a text file.
#pragma once

#include <string>

#include "coldpin/check/run.h"

namespace coldpin::report {

struct SheetStyle {
    bool colour = false;  // ANSI, only for terminals
    int width = 100;      // columns; from 60 on
};

std::string sheet(const check::Run& run, const SheetStyle& style = {});

// Findings of one measurement or analysis, in aligned columns.
std::string findings_text(const measure::Findings& findings, const SheetStyle& style = {});

}  // namespace coldpin::report
