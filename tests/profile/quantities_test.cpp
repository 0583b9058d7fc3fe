#include "coldpin/profile/quantities.h"

#include <algorithm>
#include <set>

#include <gtest/gtest.h>

namespace coldpin::profile {
namespace {

TEST(QuantitiesTest, EachHasOneNameWordsUnitsAndAMeasurementThatGivesIt) {
    std::set<std::string_view> names;
    for (const auto& one : quantities()) {
        EXPECT_TRUE(names.insert(one.name).second) << one.name;
        EXPECT_FALSE(one.words.empty()) << one.name;
        EXPECT_FALSE(one.units.empty()) << one.name;
        EXPECT_EQ(std::count(measure_kinds().begin(), measure_kinds().end(), one.measure), 1) << one.name;
    }
}

TEST(QuantitiesTest, EveryMeasurementGivesSomething) {
    for (auto kind : measure_kinds())
        EXPECT_TRUE(std::any_of(quantities().begin(), quantities().end(), [&](const Quantity& one) {
            return one.measure == kind;
        })) << kind;
}

TEST(QuantitiesTest, AreFoundByTheirWholeNameOnly) {
    ASSERT_NE(find_quantity("noise_input_referred"), nullptr);
    EXPECT_EQ(find_quantity("noise_input_referred")->measure, "noise");
    EXPECT_EQ(find_quantity("noise_input"), nullptr);
    EXPECT_EQ(find_quantity("Gain"), nullptr);
    EXPECT_EQ(find_quantity(""), nullptr);
}

TEST(QuantitiesTest, CurvesAndRejectionAreMarked) {
    EXPECT_TRUE(find_quantity("magnitude")->is_curve);
    EXPECT_TRUE(find_quantity("harmonic_5")->is_curve);
    EXPECT_FALSE(find_quantity("gain")->is_curve);
    EXPECT_TRUE(find_quantity("common_mode_rejection")->more_is_better);
    EXPECT_FALSE(find_quantity("noise_output")->more_is_better);
}

const std::vector<std::string_view> words = {"gain", "noise", "response", "cmrr", "weighting"};

TEST(NearestWordTest, FindsALetterMissingAddedOrExchanged) {
    EXPECT_EQ(nearest_word("gan", words), "gain");
    EXPECT_EQ(nearest_word("noisse", words), "noise");
    EXPECT_EQ(nearest_word("responze", words), "response");
    EXPECT_EQ(nearest_word("wieghting", words), "weighting");
}

TEST(NearestWordTest, DoesNotMindTheCase) {
    EXPECT_EQ(nearest_word("CMRR", words), "cmrr");
    EXPECT_EQ(nearest_word("Gain", words), "gain");
}

TEST(NearestWordTest, SaysNothingWhenMoreThanHalfTheWordWouldChange) {
    EXPECT_EQ(nearest_word("ga", {"gain"}), "");        // two of two letters
    EXPECT_EQ(nearest_word("gaxy", {"gain"}), "gain");  // two of four
    EXPECT_EQ(nearest_word("gxyz", {"gain"}), "");      // three of four
    EXPECT_EQ(nearest_word("x", {"y"}), "");
    EXPECT_EQ(nearest_word("", words), "");
    EXPECT_EQ(nearest_word("gain", {}), "");
    EXPECT_EQ(nearest_word("gain", {""}), "");
}

TEST(NearestWordTest, TakesTheFirstOfEquallyNearOnes) {
    EXPECT_EQ(nearest_word("gait", {"gain", "gail"}), "gain");
}

TEST(NearestWordTest, DoesNotTakeLongOverAPageOfText) {
    EXPECT_EQ(nearest_word(std::string(10'000'000, 'x'), words), "");
}

}  // namespace
}  // namespace coldpin::profile
