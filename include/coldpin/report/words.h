// Numbers and quantities in words, the same in sheet, HTML and terminal.
#pragma once

#include <string>

#include "coldpin/measure/figure.h"
#include "coldpin/profile/device_profile.h"

namespace coldpin::report {

// "-128.31 dBu +- 0.12 dB" parts: value rounded to the digits its uncertainty supports.
std::string value_text(const measure::Figure& figure);            // with bound: ">= 104.2 dB"
std::string uncertainty_text(const measure::Figure& figure);      // "± 0.12"
std::string limit_text(const profile::Requirement& requirement);  // "39.5 ... 40.5 dB", "at least 80 dB"
std::string quantity_text(const std::string& quantity, const measure::Conditions& conditions);
std::string margin_text(double margin);           // "+0.43", "+2000": digits by size
std::string frequency_text(double frequency_hz);  // "997 Hz", "10 kHz"

}  // namespace coldpin::report
