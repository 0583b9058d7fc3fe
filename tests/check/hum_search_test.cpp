#include "coldpin/check/hum_search.h"

#include <functional>

#include <gmock/gmock.h>
#include <gtest/gtest.h>

#include "coldpin/profile/rig_file.h"

#include "kit/nobody.h"

namespace coldpin::check {
namespace {

using testing::HasSubstr;

// A bench without hum, of a unit of 40 dB.
rig::Setup quiet(unsigned seed) {
    rig::Setup setup = profile::read_rig("simulated").setup;
    setup.simulated.seed = seed;
    setup.simulated.interface.ground_loop_hum_dbfs = -300.0;
    rig::SimulatedPreamp preamp;
    preamp.hum_input_dbu = -300.0;
    setup.simulated.preamp = preamp;
    return setup;
}

HumSearchReport searched(const rig::Setup& setup) {
    rig::Session session(setup, rig::open_backend(setup));
    tests::Nobody nobody;
    return search_hum(session, nobody, {});
}

TEST(HumSearchTest, EachPlaceIsNamedWithWhatItAdds) {
    // The hum's RMS over all harmonics is a little above the fundamental's, which the settings state.
    const auto expect = [](HumPlace place, double about_dbu, const std::function<void(rig::Setup&)>& make) {
        for (unsigned seed = 1; seed <= 4; ++seed) {
            rig::Setup setup = quiet(seed);
            make(setup);
            const auto report = searched(setup);
            ASSERT_TRUE(report.most.has_value()) << hum_place_name(place) << " " << report.sentences.front();
            EXPECT_EQ(hum_place_name(*report.most), hum_place_name(place)) << report.sentences.front();
            EXPECT_NEAR(*report.steps[static_cast<std::size_t>(place)].added, about_dbu, 2.0);
            ASSERT_EQ(report.steps.size(), 4U);
        }
    };
    expect(HumPlace::interface, 18.0 - 90.0,
           [](rig::Setup& s) { s.simulated.interface.own_hum_dbfs = -90.0; });
    expect(HumPlace::ground_loop, 18.0 - 85.0,
           [](rig::Setup& s) { s.simulated.interface.ground_loop_hum_dbfs = -85.0; });
    expect(HumPlace::unit, -70.0, [](rig::Setup& s) { s.simulated.preamp->hum_input_dbu = -110.0; });
    expect(HumPlace::fixture, -65.0, [](rig::Setup& s) { s.simulated.faults.fixture_hum_dbu = -105.0; });
}

TEST(HumSearchTest, SeveralSourcesAreListedTheLargestFirst) {
    rig::Setup setup = quiet(4);
    setup.simulated.interface.own_hum_dbfs = -104.0;
    setup.simulated.preamp->hum_input_dbu = -108.0;
    const auto report = searched(setup);
    EXPECT_EQ(report.most, HumPlace::unit);
    EXPECT_THAT(report.sentences.front(), HasSubstr("Most of the hum enters with the unit"));
    EXPECT_THAT(report.sentences, testing::Contains(HasSubstr("The interface itself adds")));
}

TEST(HumSearchTest, NoHumIsSaidAsSuch) {
    const auto report = searched(quiet(2));
    EXPECT_FALSE(report.most.has_value());
    EXPECT_THAT(report.sentences.front(), HasSubstr("No step adds hum"));
}

}  // namespace
}  // namespace coldpin::check
