// The curves of a run as charts: settings and channels of one quantity share a chart.
#pragma once

#include <string>

#include "coldpin/check/run.h"

namespace coldpin::report {

std::string run_charts(const check::Run& run);

}  // namespace coldpin::report
