#include "coldpin/measure/figure.h"

#include <limits>

#include <gtest/gtest.h>
#include <nlohmann/json.hpp>

#include "coldpin/measure/findings_json.h"
#include "coldpin/units/error.h"

namespace coldpin::measure {
namespace {

Findings example() {
    Findings findings;
    findings.kind = "noise";
    findings.figures.push_back(
        {"noise_output",
         -84.2100000000000001,
         "dBu",
         0.12,
         2.0,
         Bound::exact,
         {{"weighting", std::string("A")}, {"band_hz", std::vector<double>{20, 20000}}}});
    findings.figures.push_back(
        {"noise_output",
         -80.0 / 3.0,
         "dBu",
         0.1,
         2.0,
         Bound::at_most,
         {{"weighting", std::string("none")}, {"subtracted", false}, {"gain_db", 40.0}}});
    findings.curves.push_back(
        {"noise_density", "Hz", "V/sqrt(Hz)", {1.0, 2.0}, {1e-9, 2e-9 / 3.0}, {1e-10, 1e-10}, {}});
    findings.cautions = {"mind ü"};
    return findings;
}

TEST(FigureTest, IsFoundByQuantityAndConditions) {
    const Findings findings = example();
    EXPECT_EQ(findings.figure("noise_output", {{"weighting", std::string("none")}}), &findings.figures[1]);
    EXPECT_EQ(findings.figure("noise_output"), &findings.figures[0]);
    EXPECT_EQ(findings.figure("noise_output", {{"weighting", std::string("C")}}), nullptr);
    EXPECT_EQ(findings.curve("noise_density"), &findings.curves[0]);
    EXPECT_EQ(findings.curve("phase"), nullptr);
}

TEST(FindingsJsonTest, KeepsEveryBit) {
    const auto text = to_json(example()).dump();
    EXPECT_EQ(findings_from_json(nlohmann::ordered_json::parse(text), "x"), example());
}

TEST(FindingsJsonTest, HasTheMembersOfTheContractInOrder) {
    const auto json = to_json(example());
    std::vector<std::string> names;
    for (const auto& [name, value] : json.items()) names.push_back(name);
    EXPECT_EQ(names, (std::vector<std::string>{"schema", "kind", "figures", "curves", "cautions"}));
    names.clear();
    for (const auto& [name, value] : json["figures"][0].items()) names.push_back(name);
    EXPECT_EQ(names, (std::vector<std::string>{"quantity", "value", "unit", "uncertainty", "coverage_factor",
                                               "bound", "conditions"}));
    EXPECT_EQ(json["schema"], "coldpin-findings/1");
    EXPECT_EQ(json["figures"][1]["bound"], "at_most");
}

TEST(FindingsJsonTest, ANumberThatIsNoneNeverReachesAFile) {
    for (double bad : {std::numeric_limits<double>::quiet_NaN(), -std::numeric_limits<double>::infinity()}) {
        Findings findings = example();
        findings.figures[0].value = bad;
        EXPECT_THROW(to_json(findings), std::logic_error);
        findings = example();
        findings.curves[0].y[1] = bad;
        EXPECT_THROW(to_json(findings), std::logic_error);
        findings = example();
        findings.figures[0].conditions.set("gain_db", bad);
        EXPECT_THROW(to_json(findings), std::logic_error);
    }
}

TEST(FindingsJsonTest, DamageNamesTheSource) {
    for (const char* text :
         {"{}", R"({"schema": "other"})", R"({"schema": "coldpin-findings/1", "kind": 3})",
          R"({"schema": "coldpin-findings/1", "kind": "gain", "curves": [], "cautions": [], "figures": [
                                 {"quantity": "gain", "value": 1, "unit": "dB", "uncertainty": 0.1,
                                  "coverage_factor": 2, "bound": "exact", "conditions": 5}]})",
          R"({"schema": "coldpin-findings/1", "kind": "gain", "curves": [], "cautions": [], "figures": [
                                 {"quantity": "gain", "value": null, "unit": "dB", "uncertainty": 0.1,
                                  "coverage_factor": 2, "bound": "exact", "conditions": {}}]})",
          R"({"schema": "coldpin-findings/1", "kind": "gain", "curves": [], "cautions": [], "figures": [
                                 {"quantity": "gain", "value": 1, "unit": "dB", "uncertainty": 0.1,
                                  "coverage_factor": 2, "bound": "about", "conditions": {}}]})"})
        EXPECT_THROW(findings_from_json(nlohmann::ordered_json::parse(text), "x"), UsageError) << text;
}

}  // namespace
}  // namespace coldpin::measure
