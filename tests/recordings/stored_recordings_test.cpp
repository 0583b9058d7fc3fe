// The stored recordings give what is truly in them, today and with every later version. Tolerances: the
// figure's own stated uncertainty, and that must be small.
#include <fstream>
#include <string>

#include <gtest/gtest.h>
#include <nlohmann/json.hpp>

#include "coldpin/check/analysis.h"
#include "coldpin/signal/wav.h"

namespace coldpin {
namespace {

const std::string folder = std::string(COLDPIN_SOURCE_DIR) + "/tests/recordings/";

check::DescribedRecording stored(const std::string& name) {
    return {name, signal::read_wav(folder + name + ".wav"),
            *signal::read_description(folder + name + ".wav")};
}

nlohmann::json truth_of(const std::string& name) {
    std::ifstream file(folder + "truth.json");
    return nlohmann::json::parse(file).at(name);
}

measure::Findings analysed(const std::string& kind, const std::string& name) {
    const auto take = stored(name);
    check::AnalysisInputs inputs;
    inputs.main = &take;
    return check::analyse(kind, inputs, {});
}

void expect_truth(const measure::Figure* figure, double truth, double most_uncertainty) {
    ASSERT_NE(figure, nullptr);
    EXPECT_LE(figure->uncertainty, most_uncertainty) << figure->quantity;
    EXPECT_NEAR(figure->value, truth, std::max(1.5 * figure->uncertainty, 1e-9)) << figure->quantity;
}

TEST(StoredRecordingsTest, Tone) {
    expect_truth(analysed("gain", "tone").figure("gain"), truth_of("tone")["gain"], 0.01);
}

TEST(StoredRecordingsTest, Sweep) {
    const auto truth = truth_of("sweep");
    expect_truth(analysed("latency", "sweep").figure("latency"), truth["latency"], 0.1);
    expect_truth(analysed("polarity", "sweep").figure("polarity"), truth["polarity"], 0.0);
    const auto findings = analysed("response", "sweep");
    const auto* curve = findings.curve("magnitude");
    ASSERT_NE(curve, nullptr);
    for (const auto& point : truth["magnitude"]) {
        const double hz = point[0];
        for (std::size_t k = 1; k < curve->x.size(); ++k) {
            if (curve->x[k - 1] > hz || curve->x[k] <= hz) continue;
            const double share = (hz - curve->x[k - 1]) / (curve->x[k] - curve->x[k - 1]);
            EXPECT_NEAR(curve->y[k - 1] + share * (curve->y[k] - curve->y[k - 1]), point[1].get<double>(),
                        0.02)
                << hz;
        }
    }
}

TEST(StoredRecordingsTest, Noise) {
    expect_truth(analysed("noise", "noise").figure("noise_output", {{"weighting", std::string("none")}}),
                 truth_of("noise")["noise_output"], 0.1);
}

TEST(StoredRecordingsTest, Hum) {
    const auto truth = truth_of("hum");
    const auto findings = analysed("hum", "hum");
    expect_truth(findings.figure("mains_frequency"), truth["mains_frequency"], 0.005);
    for (const auto& harmonic : truth["hum_harmonic"])
        expect_truth(findings.figure("hum_harmonic", {{"harmonic", harmonic[0].get<double>()}}), harmonic[1],
                     0.2);
}

TEST(StoredRecordingsTest, Rejection) {
    const auto differential = stored("differential"), common_mode = stored("common-mode");
    check::AnalysisInputs inputs;
    inputs.main = &differential;
    inputs.common_mode = &common_mode;
    const auto findings = check::analyse("cmrr", inputs, {});
    for (double hz : {85.0, 997.0, 9973.0})
        expect_truth(findings.figure("common_mode_rejection", {{"frequency_hz", hz}}),
                     truth_of("cmrr")["common_mode_rejection"], 0.3);
}

}  // namespace
}  // namespace coldpin
