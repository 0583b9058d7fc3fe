// A bench where nobody is: any question fails the test.
#pragma once

#include <string>

#include <gtest/gtest.h>

#include "coldpin/check/perform.h"

namespace coldpin::tests {

class Nobody : public check::Bench {
  public:
    void ask(const std::string& instruction) override { ADD_FAILURE() << instruction; }
    void progress(const std::string& /*what*/, std::size_t /*step*/, std::size_t /*steps*/) override {}
};

}  // namespace coldpin::tests
