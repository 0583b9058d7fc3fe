// Decisions after ISO 14253-1: conforms from limit + U inwards, fails from limit + U outwards, undecided
// between.
#include "coldpin/check/verdict.h"

#include <gmock/gmock.h>
#include <gtest/gtest.h>

namespace coldpin::check {
namespace {

using measure::Bound;
using measure::Figure;

Figure figure(double value, double uncertainty, Bound bound = Bound::exact) {
    return {"gain", value, "dB", uncertainty, 2.0, bound, {}};
}

TEST(VerdictTest, TheUncertaintyIsCountedAgainstBoth) {
    EXPECT_EQ(decide(figure(40.0, 0.1), 39.5, 40.5), Verdict::pass);
    EXPECT_EQ(decide(figure(40.4, 0.1), 39.5, 40.5), Verdict::pass);  // just reaching the limit conforms
    EXPECT_EQ(decide(figure(40.41, 0.1), 39.5, 40.5), Verdict::undecided);
    EXPECT_EQ(decide(figure(40.59, 0.1), 39.5, 40.5), Verdict::undecided);
    EXPECT_EQ(decide(figure(40.61, 0.1), 39.5, 40.5), Verdict::fail);
    EXPECT_EQ(decide(figure(39.39, 0.1), 39.5, 40.5), Verdict::fail);
    EXPECT_EQ(decide(figure(39.5, 0.0), 39.5, std::nullopt), Verdict::pass);
}

TEST(VerdictTest, ABoundCanProveOneSideOnly) {
    EXPECT_EQ(decide(figure(90.0, 1.0, Bound::at_least), 80.0, std::nullopt), Verdict::pass);
    EXPECT_EQ(decide(figure(70.0, 1.0, Bound::at_least), 80.0, std::nullopt),
              Verdict::undecided);  // it may be 200
    EXPECT_EQ(decide(figure(70.0, 1.0, Bound::at_least), std::nullopt, 60.0), Verdict::fail);
    EXPECT_EQ(decide(figure(-130.0, 1.0, Bound::at_most), std::nullopt, -120.0), Verdict::pass);
    EXPECT_EQ(decide(figure(-110.0, 1.0, Bound::at_most), std::nullopt, -120.0), Verdict::undecided);
    EXPECT_EQ(decide(figure(-110.0, 1.0, Bound::at_most), -100.0, std::nullopt), Verdict::fail);
}

profile::Requirement requirement(const std::string& quantity, std::optional<double> min,
                                 std::optional<double> max, const std::string& unit) {
    profile::Requirement made;
    made.quantity = quantity;
    made.min = min;
    made.max = max;
    made.unit = unit;
    return made;
}

TEST(VerdictTest, TheFigureWithTheConditionsIsTheOneJudged) {
    measure::Findings findings;
    findings.figures.push_back(
        {"common_mode_rejection", 90.0, "dB", 0.5, 2.0, Bound::exact, {{"frequency_hz", 100.0}}});
    findings.figures.push_back(
        {"common_mode_rejection", 60.0, "dB", 0.5, 2.0, Bound::exact, {{"frequency_hz", 10000.0}}});
    auto asked = requirement("common_mode_rejection", 80.0, std::nullopt, "dB");
    asked.conditions.set("frequency_hz", 10000.0);
    const auto judgement = judge(asked, "", "", {&findings});
    EXPECT_EQ(judgement.verdict, Verdict::fail);
    EXPECT_DOUBLE_EQ(*judgement.margin, -20.0);
    EXPECT_EQ(judgement.sentence,
              "Common-mode rejection at 10000 Hz is 60.00 dB ± 0.5 dB; at least 80 dB is asked.");
    asked.conditions.set("frequency_hz", 1000.0);
    EXPECT_EQ(judge(asked, "", "", {&findings}).verdict, Verdict::undecided);
    EXPECT_THAT(judge(asked, "", "", {&findings}).sentence, testing::HasSubstr("was not measured"));
}

TEST(VerdictTest, UnitsAreConverted) {
    measure::Findings findings;
    findings.figures.push_back({"noise_output", 0.0, "dBu", 0.1, 2.0, Bound::exact, {}});
    EXPECT_NEAR(
        judge(requirement("noise_output", std::nullopt, -2.0, "dBV"), "", "", {&findings}).figure->value,
        -2.2185, 1e-4);
    const auto volts = judge(requirement("noise_output", std::nullopt, 0.8, "V"), "", "", {&findings});
    EXPECT_NEAR(volts.figure->value, 0.7746, 1e-4);
    EXPECT_NEAR(volts.figure->uncertainty, 0.7746 * 0.1 / 8.686, 1e-4);
    findings.figures[0].unit = "dBFS";
    EXPECT_EQ(judge(requirement("noise_output", std::nullopt, 0.8, "V"), "", "", {&findings}).verdict,
              Verdict::undecided);
}

TEST(VerdictTest, AMaskIsJudgedAtItsWorstPoint) {
    measure::Findings findings;
    measure::Curve curve{"magnitude",
                         "Hz",
                         "dB",
                         {20, 100, 1000, 10000, 20000},
                         {-0.9, 0.0, 0.0, 0.3, -2.0},
                         {0.02, 0.02, 0.02, 0.02, 0.02},
                         {}};
    findings.curves.push_back(curve);
    auto asked = requirement("magnitude", std::nullopt, std::nullopt, "dB");
    asked.mask = {{20, -1.0, 0.5}, {10000, -0.5, 0.5}};
    auto judgement = judge(asked, "", "", {&findings});
    EXPECT_EQ(judgement.verdict, Verdict::pass);  // beyond the mask nothing is asked
    EXPECT_DOUBLE_EQ(*judgement.worst_frequency_hz, 20.0);
    asked.mask = {{20, -0.91, 0.5}, {10000, -0.5, 0.5}};
    EXPECT_EQ(judge(asked, "", "", {&findings}).verdict, Verdict::undecided);
    asked.mask = {{20, -1.0, 0.5}, {20000, -1.0, 0.5}};
    judgement = judge(asked, "", "", {&findings});
    EXPECT_EQ(judgement.verdict, Verdict::fail);
    EXPECT_NEAR(*judgement.margin, -1.0, 1e-12);
    // Between mask points the limit runs straight over log f: at 100 Hz between 10 Hz (0) and 1 kHz (-2) it
    // is -1.
    asked.mask = {{10, 0.0, std::nullopt}, {1000, -2.0, std::nullopt}};
    findings.curves[0] = {"magnitude", "Hz", "dB", {100}, {-0.5}, {0.0}, {}};
    EXPECT_NEAR(*judge(asked, "", "", {&findings}).margin, 0.5, 1e-12);
}

TEST(VerdictTest, AMaskOnABoundPassesOrStaysOpen) {
    measure::Findings findings;
    measure::Curve curve{"common_mode_rejection", "Hz", "dB", {100, 1000}, {75.0, 90.0}, {0.1, 0.1}, {}};
    curve.conditions.set("at_least_at_hz", std::vector<double>{100.0});
    findings.curves.push_back(curve);
    auto asked = requirement("common_mode_rejection", std::nullopt, std::nullopt, "dB");
    asked.mask = {{50, 80.0, std::nullopt}, {2000, 80.0, std::nullopt}};
    EXPECT_EQ(judge(asked, "", "", {&findings}).verdict, Verdict::undecided);
}

TEST(VerdictTest, FailBeatsUndecidedBeatsPass) {
    const auto with = [](std::initializer_list<Verdict> verdicts) {
        std::vector<Judgement> all;
        for (Verdict verdict : verdicts) {
            all.emplace_back();
            all.back().verdict = verdict;
        }
        return overall(all);
    };
    EXPECT_EQ(with({Verdict::pass, Verdict::pass}), Verdict::pass);
    EXPECT_EQ(with({Verdict::pass, Verdict::undecided}), Verdict::undecided);
    EXPECT_EQ(with({Verdict::undecided, Verdict::fail, Verdict::pass}), Verdict::fail);
    EXPECT_EQ(with({}), Verdict::undecided);
}

}  // namespace
}  // namespace coldpin::check
