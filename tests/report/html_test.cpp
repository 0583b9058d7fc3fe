// The sheet and the HTML report of real runs on the simulated rig.
#include "coldpin/report/html.h"

#include <string>
#include <vector>

#include <gmock/gmock.h>
#include <gtest/gtest.h>

#include "coldpin/check/perform.h"
#include "coldpin/report/sheet.h"

namespace coldpin::report {
namespace {

using testing::HasSubstr;
using testing::Not;

const std::string profiles = std::string(COLDPIN_SOURCE_DIR) + "/profiles/";

class SilentBench : public check::Bench {
    void ask(const std::string&) override {}
    void progress(const std::string&, std::size_t, std::size_t) override {}
};

check::Run run_of(const std::string& rig_name, const std::string& device_name) {
    const auto device = profile::read_device_profile(profiles + "devices/" + device_name);
    auto rig = profile::read_rig(rig_name);
    rig.setup.simulated.preamp = device.simulated;
    rig::Session session(rig.setup, rig::open_backend(rig.setup));
    SilentBench bench;
    return check::perform(device, rig, session, bench,
                          {"0.1.0", "2026-05-04T09:03:07Z", "<b>42</b>", "", "a & b", {}});
}

std::size_t columns(const std::string& line) {
    return static_cast<std::size_t>(std::count_if(
        line.begin(), line.end(), [](char c) { return (static_cast<unsigned char>(c) & 0xC0U) != 0x80U; }));
}

TEST(HtmlTest, OpensOfflineHoldsEveryRequirementAndIsWellFormed) {
    for (const auto& [rig, device] :
         {std::pair{std::string("simulated"), std::string("harrowgill-duo.toml")},
          std::pair{profiles + "rigs/simulated-cold-leg-open.toml", std::string("fennmark-pl2.toml")}}) {
        const check::Run run = run_of(rig, device);
        const std::string page = html(run);
        EXPECT_THAT(page, Not(HasSubstr("http")));
        EXPECT_THAT(page, Not(HasSubstr("<script")));
        EXPECT_THAT(page, Not(testing::ContainsRegex("[^a-z]nan[^a-z]")));
        EXPECT_THAT(page, HasSubstr("&lt;b&gt;42&lt;/b&gt;"));
        EXPECT_THAT(page, HasSubstr("a &amp; b"));
        for (const char* chart : {"Response", "Noise density", "Common-mode rejection", "Phase"})
            EXPECT_THAT(page, HasSubstr(std::string("aria-label=\"") + chart));
        std::size_t words = 0;
        for (std::size_t at = page.find("class=\"word\""); at != std::string::npos;
             at = page.find("class=\"word\"", at + 1))
            ++words;
        EXPECT_EQ(words, run.judgements.size());
        // Every element that opens closes, in order.
        std::vector<std::string> open;
        const std::size_t begin = page.find("<body>");
        const std::string body = page.substr(begin, page.find("</html>") - begin);
        for (std::size_t at = body.find('<'); at != std::string::npos; at = body.find('<', at + 1)) {
            const bool closes = body[at + 1] == '/';
            const std::size_t first = at + (closes ? 2 : 1), end = body.find('>', at);
            ASSERT_NE(end, std::string::npos);
            const std::string name = body.substr(first, body.find_first_of(" \n/>", first) - first);
            if (body[end - 1] == '/' || name == "br" || name == "meta") continue;
            if (!closes) {
                open.push_back(name);
            } else {
                ASSERT_FALSE(open.empty()) << name;
                ASSERT_EQ(open.back(), name);
                open.pop_back();
            }
        }
        EXPECT_TRUE(open.empty());
    }
}

TEST(SheetTest, LinesKeepToTheirWidthAndColumnsAlign) {
    const check::Run run = run_of(profiles + "rigs/simulated-cold-leg-open.toml", "fennmark-pl2.toml");
    const std::string text = sheet(run, {false, 100});
    EXPECT_THAT(text, HasSubstr("FAIL"));
    EXPECT_THAT(text, HasSubstr("What did not pass"));
    EXPECT_THAT(text, Not(HasSubstr("\033")));
    std::istringstream lines(text);
    std::size_t word_column = 0;
    for (std::string line; std::getline(lines, line);) {
        EXPECT_LE(columns(line), 132U) << line;
        const auto at = std::min(line.find("● pass"), line.find("▼ FAIL"));
        if (at == std::string::npos) continue;
        const std::size_t column = columns(line.substr(0, at));
        if (word_column != 0) {
            EXPECT_EQ(column, word_column) << line;
        }
        word_column = column;
    }
    EXPECT_GT(word_column, 0U);
    EXPECT_THAT(sheet(run, {true, 100}), HasSubstr("\033[1;31m"));
}

}  // namespace
}  // namespace coldpin::report
