#include "coldpin/rig/meter.h"

#include <algorithm>
#include <cctype>
#include <cmath>

#include <fmt/core.h>

#include "coldpin/units/error.h"
#include "coldpin/units/level.h"

namespace coldpin::rig {

namespace {

constexpr double most_volts = 30.0;   // no line output makes more
constexpr double least_volts = 1e-3;  // below, a hand-held meter shows its own noise
constexpr double nearly_full = 0.95;

[[noreturn]] void refuse(const std::string& text, const std::string& why) {
    throw UsageError(fmt::format("'{}': {}", text, why));
}

std::string trimmed(const std::string& text) {
    const auto first = text.find_first_not_of(" \t\r\n"), last = text.find_last_not_of(" \t\r\n");
    return first == std::string::npos ? "" : text.substr(first, last - first + 1);
}

double half_width_volts(const MeterReading& reading, const MeterAccuracy& accuracy) {
    return 0.01 * accuracy.percent * reading.volts_rms + accuracy.digits * reading.resolution_volts;
}

}  // namespace

MeterReading parse_meter_reading(const std::string& text) {
    std::string words = trimmed(text);
    std::replace(words.begin(), words.end(), ',', '.');
    std::size_t end = 0;
    double value = 0.0;
    try {
        value = std::stod(words, &end);
    } catch (const std::exception&) {
        refuse(trimmed(text), "expected what the meter shows, such as 1.228 V, 1228 mV or +4.02 dBu");
    }
    const std::string number = words.substr(0, end);
    std::string unit;
    for (char c : words.substr(end))
        if (std::isspace(static_cast<unsigned char>(c)) == 0) unit += c;
    if (!std::isfinite(value) || number.find_first_of("xX") != std::string::npos)
        refuse(trimmed(text), "expected what the meter shows, such as 1.228 V");
    const auto point = number.find('.');
    const double places = point == std::string::npos ? 0.0 : static_cast<double>(number.size() - point - 1);
    const double step = std::pow(10.0, -places);
    MeterReading reading;
    if (unit == "V" || unit == "Vrms" || unit == "VRMS" || unit == "Vac" || unit == "VAC") {
        reading = {value, step};
    } else if (unit == "mV" || unit == "mVrms" || unit == "mVac" || unit == "mVAC") {
        reading = {1e-3 * value, 1e-3 * step};
    } else if (unit == "dBu" || unit == "dBV") {
        const double dbu = unit == "dBu" ? value : units::dbu_from_dbv(value);
        reading.volts_rms = units::volts_rms_from_dbu(dbu);
        reading.resolution_volts = reading.volts_rms * step / units::db_per_relative_amplitude;
    } else if (unit.empty()) {
        refuse(trimmed(text), "a number without its unit: V, mV, dBu or dBV");
    } else if (unit == "Vpp" || unit == "Vp" || unit == "Vpk") {
        refuse(trimmed(text), "a peak value: set the meter to AC volts, which shows RMS");
    } else {
        refuse(trimmed(text),
               fmt::format("'{}' is no unit of this reading: expected V, mV, dBu or dBV", unit));
    }
    if (!(reading.volts_rms > 0.0)) refuse(trimmed(text), "an AC reading is above zero");
    if (reading.volts_rms > most_volts)
        refuse(trimmed(text),
               "no line output makes that much: is it really volts, AC, across the output's pins 2 and 3?");
    if (reading.volts_rms < least_volts)
        refuse(trimmed(text),
               "too little for a hand-held meter: read at the output itself, in front of the pad, on an AC "
               "range, with "
               "the tone playing");
    return reading;
}

double meter_uncertainty_db(const MeterReading& reading, const MeterAccuracy& accuracy, double distortion) {
    const double accuracy_std = half_width_volts(reading, accuracy) / std::sqrt(3.0),
                 resolution_std = 0.5 * reading.resolution_volts / std::sqrt(3.0),
                 shape_std = accuracy.true_rms ? 0.0 : reading.volts_rms * distortion / 3.0 / std::sqrt(3.0);
    const double std = std::hypot(std::hypot(accuracy_std, resolution_std), shape_std);
    return units::db_from_ratio(1.0 + 2.0 * std / reading.volts_rms);
}

std::optional<RangeAdvice> advise_range(const MeterReading& reading, const MeterAccuracy& accuracy,
                                        double headroom_db) {
    const double now_db = meter_uncertainty_db(reading, accuracy);
    const double full_volts = reading.resolution_volts * accuracy.counts;
    std::optional<RangeAdvice> best;
    const auto offer = [&](const MeterReading& then, double change_db, const std::string& sentence) {
        const double then_db = meter_uncertainty_db(then, accuracy);
        if (then_db > 0.5 * now_db * (1.0 + 1e-9)) return;
        if (best && best->uncertainty_db <= then_db) return;
        best = RangeAdvice{
            change_db, then_db,
            fmt::format("{}: the uncertainty falls from {:.2f} to {:.2f} dB.", sentence, now_db, then_db)};
    };
    // The next finer range holds a tenth of this one.
    const MeterReading finer{reading.volts_rms, 0.1 * reading.resolution_volts};
    if (reading.volts_rms < 0.1 * full_volts * nearly_full)
        offer(finer, 0.0, fmt::format("Use the meter's {:.4g} V range", 0.1 * full_volts));
    else
        offer({0.1 * full_volts * nearly_full, finer.resolution_volts},
              units::db_from_ratio(0.1 * full_volts * nearly_full / reading.volts_rms),
              fmt::format("Play {:.1f} dB lower and use the meter's {:.4g} V range",
                          -units::db_from_ratio(0.1 * full_volts * nearly_full / reading.volts_rms),
                          0.1 * full_volts));
    const double more_db =
        std::min(headroom_db, units::db_from_ratio(full_volts * nearly_full / reading.volts_rms));
    if (more_db > 1.0)
        offer({reading.volts_rms * units::ratio_from_db(more_db), reading.resolution_volts}, more_db,
              fmt::format("Play {:.1f} dB higher on the same range", more_db));
    return best;
}

}  // namespace coldpin::rig
