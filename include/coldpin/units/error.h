// What goes wrong, as exceptions whose message a person at the bench can act on.
//
// A message names the file, option or figure concerned, says what was found and what to do, in one or two
// lines, without a trailing full stop's worth of ceremony. The class only decides the exit status.
#pragma once

#include <stdexcept>
#include <string>

namespace coldpin {

// Base of everything that coldpin throws on purpose. Never thrown as itself.
class Error : public std::runtime_error {
  protected:
    using std::runtime_error::runtime_error;
};

// The command, file or profile is wrong: nothing was tried, correct it and call again (exit status 2).
class UsageError : public Error {
  public:
    explicit UsageError(const std::string& message) : Error(message) {}
};

// The rig or the recording does not allow the measurement: device missing, dropouts, clipping, silence,
// a result that physics forbids (exit status 3).
class CannotMeasure : public Error {
  public:
    explicit CannotMeasure(const std::string& message) : Error(message) {}
};

}  // namespace coldpin
