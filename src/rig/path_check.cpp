#include "coldpin/rig/path_check.h"

#include <algorithm>
#include <array>
#include <cmath>
#include <complex>
#include <functional>
#include <numbers>

#include <fmt/core.h>

#include "coldpin/spectrum/fft.h"
#include "coldpin/spectrum/phasor_sum.h"
#include "coldpin/spectrum/statistics.h"
#include "coldpin/spectrum/window.h"
#include "coldpin/units/level.h"

#include "path_probe.h"
#include "sweep_lag.h"

namespace coldpin::rig {

namespace {

using spectrum::median;
using Complex = std::complex<double>;
constexpr double two_pi = 2.0 * std::numbers::pi;

// Limits, and where they come from. Converters hold a level step to a hundredth of a decibel and a level to a
// few hundredths; a linear interpolator or a limiter misses by tenths and more.
constexpr double sure = 7.0;  // standard deviations
constexpr double level_step_db = 0.06;
constexpr double level_moved_db = 0.08;
constexpr double flat_db = 0.5;
constexpr double echo_ratio = 0.0022;  // -53 dB
constexpr double image_ratio = 3e-5;   // -90 dB
constexpr double clock_ppm_limit = 1.0;
constexpr double clock_wander_ppm = 3.0;
constexpr double clipped_ratio = 0.01;
constexpr double full_scale = 0.9999;
constexpr double edge_ratio = 0.35;     // -9 dB
constexpr double edge_of_rate = 0.485;  // converters pass up to here, resamplers of a lower rate do not
constexpr std::array<double, 10> common_rates_hz = {8000,  11025, 16000, 22050, 24000,
                                                    32000, 44100, 48000, 88200, 96000};

// One look at the recording, in steps that share what they found.
class PathLook {
  public:
    PathLook(std::span<const double> recording, const PathProbe& probe, const PathExpectation& expectation)
        : x_(recording), probe_(probe), expectation_(expectation), rate_(probe.rate_hz) {}

    PathReport report() {
        find_clipping();
        if (!find_sweep()) return report_;
        unroll();
        look_at_delays();
        look_for_echo();
        look_at_levels();
        look_at_response();
        look_for_images();
        look_at_polarity();
        return report_;
    }

  private:
    void add(PathFault fault, std::string sentence, bool spoils = true) {
        if (report_.finding(fault) == nullptr)
            report_.findings.push_back({fault, std::move(sentence), spoils});
    }

    std::span<const double> part(std::size_t begin, std::size_t end) const {
        const auto first = static_cast<long long>(begin) + lag_, last = static_cast<long long>(end) + lag_;
        if (first < 0 || last > static_cast<long long>(x_.size())) return {};
        return x_.subspan(static_cast<std::size_t>(first), end - begin);
    }

    // Peak amplitude and phase of a tone in [begin, end) of the probe, as of frame 0 of the probe, by a Hann
    // window.
    Complex phasor(std::size_t begin, std::size_t end, double hz) const {
        const auto samples = part(begin, end);
        if (samples.empty()) return 0.0;
        std::vector<double> windowed(samples.begin(), samples.end());
        const auto window = spectrum::window_samples(spectrum::Window::hann, windowed.size());
        double sum = 0.0;
        for (std::size_t n = 0; n < windowed.size(); ++n) {
            windowed[n] *= window[n];
            sum += window[n];
        }
        const double step = two_pi * hz / rate_;
        return 2.0 / sum * spectrum::phasor_sum(windowed, step) *
               std::polar(1.0, -two_pi * std::fmod(hz / rate_ * static_cast<double>(begin), 1.0));
    }

    void find_clipping() {
        std::size_t run = 0, longest = 0;
        for (double v : x_) {
            run = std::abs(v) >= full_scale ? run + 1 : 0;
            longest = std::max(longest, run);
        }
        if (longest >= 2)
            add(PathFault::clipped,
                "The input clips: its gain is too high for what is sent. Turn the input down and calibrate "
                "again.");
    }

    // A live input never rests on zero: its noise moves it.
    bool ends_in_zeros() const {
        constexpr double dead_s = 0.02;
        const auto count = std::min(x_.size(), static_cast<std::size_t>(dead_s * rate_));
        return std::all_of(x_.end() - static_cast<std::ptrdiff_t>(count), x_.end(),
                           [](double v) { return v == 0.0; });
    }

    bool find_sweep() {
        const auto sent = signal::render(probe_.sweep);
        const Lag lag = lag_of(x_, sent);
        // A rate that differs or a limiter smears the sweep; it is heard all the same.
        constexpr double certain = 12.0;
        if (lag.clarity < certain && ends_in_zeros()) {
            add(PathFault::not_heard,
                "Exact zeros arrive from somewhere on: the device left, is switched off, or the operating "
                "system does not "
                "let programs record. Nothing was measured.");
            return false;
        }
        if (lag.clarity < certain) {
            add(PathFault::not_heard,
                "Nothing of the test signal arrives here: the wrong output or input, a plug, a muted channel "
                "or a knob "
                "at zero.");
            return false;
        }
        lag_ = lag.frames - static_cast<long long>(probe_.sweep_part.begin);
        const auto room = static_cast<std::size_t>(0.05 * rate_);
        if (part(0, probe_.frames + room).empty()) {
            add(PathFault::not_heard,
                "The test signal arrives too late or is cut off: the path's latency is out of the ordinary.");
            return false;
        }
        return true;
    }

    // The transfer function and impulse response from the sweep alone.
    void unroll() {
        const auto margin = static_cast<std::size_t>(0.004 * rate_),
                   tail = static_cast<std::size_t>(0.049 * rate_);
        const auto cut = part(probe_.sweep_part.begin - margin, probe_.sweep_part.end + tail);
        auto sent = signal::render(probe_.sweep);
        sent.insert(sent.begin(), margin, 0.0);
        const std::size_t size = spectrum::fast_fft_size(cut.size() + sent.size());
        const auto received = spectrum::forward_fft(cut, size);
        const auto played = spectrum::forward_fft(sent, size);
        bin_hz_ = rate_ / static_cast<double>(size);
        double strongest = 0.0;
        for (const Complex& bin : played) strongest = std::max(strongest, std::norm(bin));
        transfer_.resize(received.size());
        for (std::size_t k = 0; k < received.size(); ++k)
            transfer_[k] = received[k] * std::conj(played[k]) / (std::norm(played[k]) + 1e-7 * strongest);
        size_ = size;
    }

    // Between two frequencies with soft edges an octave-third wide: the impulse response there.
    std::vector<double> band_response(double low_hz, double high_hz) const {
        std::vector<Complex> bins(transfer_.size(), 0.0);
        const auto rise = [](double hz, double from, double to) {
            const double along = std::clamp(std::log(hz / from) / std::log(to / from), 0.0, 1.0);
            return 0.5 - 0.5 * std::cos(std::numbers::pi * along);
        };
        for (std::size_t k = 1; k < bins.size(); ++k) {
            const double hz = bin_hz_ * static_cast<double>(k);
            bins[k] = transfer_[k] * rise(hz, low_hz / 1.26, low_hz * 1.26) *
                      (1.0 - rise(hz, high_hz / 1.26, high_hz * 1.26));
        }
        return spectrum::inverse_fft(bins, size_);
    }

    // The peak of a band's response: its size, and its delay in frames from where the sweep was taken to
    // begin.
    struct BandPeak {
        double size = 0.0, delay = 0.0;
    };
    BandPeak band_peak(double low_hz, double high_hz) const {
        const auto response = band_response(low_hz, high_hz);
        std::size_t at = 0;
        for (std::size_t n = 0; n < response.size(); ++n)
            if (std::abs(response[n]) > std::abs(response[at])) at = n;
        const auto value = [&](std::size_t n) { return std::abs(response[n % response.size()]); };
        const double before = value(at + response.size() - 1), here = value(at), after = value(at + 1);
        const double bend = before - 2.0 * here + after;
        const double fraction = bend < 0.0 ? 0.5 * (before - after) / bend : 0.0;
        const double place = static_cast<double>(at) + fraction;
        return {here, place > 0.5 * static_cast<double>(size_) ? place - static_cast<double>(size_) : place};
    }

    // Phases of a tone block by block; empty when it is too faint.
    struct Phases {
        std::vector<double> rad, frame;
        double slope_rad_per_frame = 0.0, spread_rad = 0.0;
    };
    Phases phases(std::size_t begin, std::size_t end, double hz) const {
        Phases found;
        const auto block = static_cast<std::size_t>(0.012 * rate_), hop = block / 2;
        for (std::size_t at = begin; at + block <= end; at += hop) {
            const Complex tone = phasor(at, at + block, hz);
            const double angle = std::arg(tone);
            found.rad.push_back(found.rad.empty()
                                    ? angle
                                    : found.rad.back() + std::remainder(angle - found.rad.back(), two_pi));
            found.frame.push_back(static_cast<double>(at) + 0.5 * static_cast<double>(block));
        }
        if (found.rad.size() < 6) return {};
        std::vector<double> turns;
        for (std::size_t k = 1; k < found.rad.size(); ++k) turns.push_back(found.rad[k] - found.rad[k - 1]);
        const double turn = median(turns);
        found.slope_rad_per_frame = turn / static_cast<double>(hop);
        // Second differences are blind to slopes and to clocks that wander slowly.
        std::vector<double> bends;
        for (std::size_t k = 1; k < turns.size(); ++k) bends.push_back(std::abs(turns[k] - turns[k - 1]));
        found.spread_rad = median(bends) / (0.6745 * std::sqrt(6.0));
        return found;
    }

    // The phase at which the series steps, after its slope is taken out; 0 when it does not.
    static double step_of(const Phases& series) {
        double largest = 0.0;
        std::vector<double> flat;
        for (std::size_t k = 0; k < series.rad.size(); ++k)
            flat.push_back(series.rad[k] - series.slope_rad_per_frame * (series.frame[k] - series.frame[0]));
        for (std::size_t k = 2; k + 2 <= flat.size(); ++k) {
            const std::vector<double> before(flat.begin(), flat.begin() + static_cast<std::ptrdiff_t>(k)),
                after(flat.begin() + static_cast<std::ptrdiff_t>(k), flat.end());
            const double step = median(after) - median(before);
            if (std::abs(step) > std::abs(largest)) largest = step;
        }
        return largest;
    }

    void look_at_delays() {
        const auto edge = static_cast<std::size_t>(0.004 * rate_);
        const Phases low =
            phases(probe_.stairs.front().begin + edge, probe_.stairs.back().end - edge, probe_.low_hz);
        const Phases high =
            phases(probe_.high_tone.begin + edge, probe_.high_tone.end - edge, probe_.high_hz);
        if (low.rad.empty()) return;
        find_clock(low);
        const auto lost = [&](const std::string& how) {
            add(PathFault::frames_lost,
                fmt::format(
                    "Frames were lost or repeated on the way ({}), whether the driver says so or not. Close "
                    "other programs, use a larger buffer (frames_per_buffer), another USB port or cable.",
                    how));
        };
        const double frame_rad = two_pi * probe_.low_hz / rate_;
        const double step = step_of(low);
        if (std::abs(step) > std::max({0.9 * frame_rad, sure * low.spread_rad, 0.05}))
            lost(fmt::format("the {:g} Hz tone jumps by {:.2f} turns", probe_.low_hz,
                             std::abs(step) / two_pi));
        // Where little of the high tone passes, its phase says nothing.
        if (!high.rad.empty() && high.spread_rad < 0.2) {
            const double jump = step_of(high);
            if (std::abs(jump) > std::max(sure * high.spread_rad, 0.6))
                lost(fmt::format("the {:g} Hz tone jumps by {:.2f} turns", probe_.high_hz,
                                 std::abs(jump) / two_pi));
        }
        compare_delays(low, lost);
        find_zeros(lost);
    }

    void find_clock(const Phases& low) {
        const double ppm = low.slope_rad_per_frame / (two_pi * probe_.low_hz / rate_) * 1e6;
        // A clock that runs fast at the input takes more frames: the tone looks slower.
        report_.clock_ppm = -ppm;
        const double std_ppm = low.spread_rad / (two_pi * probe_.low_hz / rate_) * 1e6 /
                               (low.frame.back() - low.frame.front()) * 4.0;
        report_.clock_std_ppm = std_ppm;
        if (std::abs(ppm) < std::max(clock_ppm_limit, sure * std_ppm)) return;
        // A jump bends the slope little, since it is a median; a wander differs from half to half.
        const std::size_t half = low.rad.size() / 2;
        const auto slope = [&](std::size_t first, std::size_t last) {
            std::vector<double> turns;
            for (std::size_t k = first + 1; k < last; ++k)
                turns.push_back((low.rad[k] - low.rad[k - 1]) / (low.frame[k] - low.frame[k - 1]));
            return median(turns) / (two_pi * probe_.low_hz / rate_) * 1e6;
        };
        const double wander = std::abs(slope(0, half) - slope(half, low.rad.size()));
        if (wander > std::max(clock_wander_ppm, 4.0 * sure * std_ppm))
            add(PathFault::unsteady_clocks,
                fmt::format("Output and input run from different clocks that wander against each other (by "
                            "{:.0f} ppm "
                            "within half a second). Use one interface for both, or lock their clocks.",
                            wander));
        else
            add(PathFault::two_clocks,
                fmt::format(
                    "Output and input run from different clocks: the input's is {:+.1f} ppm off. Steady, so "
                    "it can be corrected; one interface for both is better.",
                    -ppm),
                false);
    }

    void compare_delays(const Phases& low, const std::function<void(const std::string&)>& lost) {
        const double clock = report_.clock_ppm.value_or(0.0) * 1e-6;
        // Of each band at the moment when the sweep is there.
        const auto& sweep = std::get<signal::Sweep>(probe_.sweep.kind);
        const double constant_s = signal::sweep_time_constant_s(sweep, probe_.sweep.length_s);
        std::vector<double> delays;
        const double top_hz = std::min(15000.0, 0.36 * rate_);
        const double heard = band_peak(1000.0, 4000.0).size;
        for (const auto& [from, to] :
             {std::pair{1000.0, 4000.0}, {250.0, 1000.0}, {4000.0, top_hz}, {0.9 * top_hz, 0.44 * rate_}}) {
            const BandPeak peak = band_peak(from, to);
            // A band that hardly passes has no delay to speak of. Bands are weighed by their width.
            if (peak.size * 3000.0 / (to - from) < 0.3 * heard) continue;
            const double at_s = constant_s * std::log(std::sqrt(from * to) / sweep.from_hz);
            const double frames = static_cast<double>(probe_.sweep_part.begin) + at_s * rate_;
            delays.push_back(peak.delay - clock * frames);
        }
        const auto [least, most] = std::minmax_element(delays.begin(), delays.end());
        // Filters and shelves delay the bands by a few frames; fewer lost ones show between the tones.
        if (*most - *least > 8.0) lost(fmt::format("within the sweep, by about {:.0f}", *most - *least));
        report_.latency_frames = delays.front() + static_cast<double>(lag_);
        // The staircase against the sweep: the tone's phase tells its delay up to whole periods.
        const double frame_rad = two_pi * probe_.low_hz / rate_;
        const double middle = low.rad[low.rad.size() / 2], frame = low.frame[low.rad.size() / 2];
        // A sine, in a transform that takes a cosine for real: a quarter turn.
        double ahead = std::remainder(middle + 0.5 * std::numbers::pi, two_pi);
        const double expected = -frame_rad * (delays.front() + clock * frame);
        ahead = std::remainder(ahead - expected, std::numbers::pi);  // either polarity
        const double frames = std::abs(ahead) / frame_rad;
        if (frames > 4.0) lost(fmt::format("between tone and sweep, by about {:.0f} or more", frames));
        // And the tone behind the sweep against the one before it.
        const auto edge = static_cast<std::size_t>(0.004 * rate_);
        const ProbePart& anchor = probe_.anchor;
        const double later = std::arg(phasor(anchor.begin + edge, anchor.end - edge, probe_.low_hz));
        const double later_frame = 0.5 * static_cast<double>(anchor.begin + anchor.end);
        const double slip = std::abs(std::remainder(
                                later - middle - low.slope_rad_per_frame * (later_frame - frame), two_pi)) /
                            frame_rad;
        if (slip > std::max(2.5, sure * low.spread_rad / frame_rad) &&
            report_.finding(PathFault::unsteady_clocks) == nullptr)
            lost(fmt::format("between the first tone and the last, by about {:.0f} or more", slip));
    }

    void find_zeros(const std::function<void(const std::string&)>& lost) const {
        std::size_t run = 0, longest = 0;
        for (double v : part(probe_.stairs.front().begin, probe_.frames)) {
            run = v == 0.0 ? run + 1 : 0;
            longest = std::max(longest, run);
        }
        constexpr std::size_t dead_zeros = 8;
        if (longest >= dead_zeros) lost(fmt::format("{} exact zeros in a row", longest));
    }

    void look_at_levels() {
        const auto edge = static_cast<std::size_t>(0.006 * rate_);
        std::array<double, 4> levels{}, early{}, late{};
        for (std::size_t k = 0; k < probe_.stairs.size(); ++k) {
            const auto& stair = probe_.stairs[k];
            const std::size_t begin = stair.begin + edge, end = stair.end - (k == 3 ? edge : edge / 2);
            const std::size_t piece = (end - begin) / 3;
            const auto level = [&](std::size_t from, std::size_t to) {
                return units::db_from_ratio(std::abs(phasor(from, to, probe_.low_hz)) + 1e-12) -
                       stair.level_db;
            };
            levels[k] = level(begin, end);
            early[k] = level(begin, begin + piece);
            late[k] = level(end - piece, end);
        }
        const double noise = noise_beside(probe_.stairs[0]);
        const double quiet_std_db = units::db_per_relative_amplitude * noise /
                                    (units::ratio_from_db(levels[0] + probe_.stairs[0].level_db));
        report_.gain_db = levels[2] - probe_.level_dbfs;
        report_.gain_std_db = units::db_per_relative_amplitude * noise / units::ratio_from_db(levels[2]);
        const double limit = std::max(level_step_db, sure * quiet_std_db);
        double most = 0.0, course = 0.0;
        for (std::size_t k = 0; k < levels.size(); ++k) {
            most = std::max(most, std::abs(levels[k] - levels[2]));
            course = std::max(course, std::abs(late[k] - early[k]));
        }
        // An echo of the loud step stands in the quiet one after it.
        if (report_.finding(PathFault::frames_lost) == nullptr &&
            report_.finding(PathFault::echo) == nullptr && (most > limit || course > 2.0 * limit))
            add(PathFault::level_dependent,
                fmt::format(
                    "The gain of the path depends on the level: {:.2f} dB between tones 20 dB apart{}. An "
                    "automatic gain, limiter or compressor is on: switch it off in the operating system and "
                    "in "
                    "the interface's mixer.",
                    most, course > 2.0 * limit ? fmt::format(", {:.2f} dB within one of them", course) : ""));
        measure_distortion();
        if (!expectation_.gain_db) return;
        const double off = *report_.gain_db - *expectation_.gain_db;
        if (std::abs(off) >
            std::max({level_moved_db, expectation_.gain_uncertainty_db, sure * *report_.gain_std_db}))
            add(PathFault::level_moved, fmt::format("The level here is {:+.2f} dB from what the calibration "
                                                    "saw: a knob was moved, or the plug "
                                                    "is another one. Put it back, or run coldpin calibrate.",
                                                    off));
    }

    // Amplitude noise in a tone's own window: what stands at frequencies beside it.
    double noise_beside(const ProbePart& stair) const {
        std::vector<double> sizes;
        for (double away : {-310.0, -230.0, -170.0, 190.0, 270.0, 330.0})
            sizes.push_back(
                std::abs(phasor(stair.begin + static_cast<std::size_t>(0.006 * rate_),
                                stair.end - static_cast<std::size_t>(0.003 * rate_), probe_.low_hz + away)));
        return median(sizes) / 1.1774;  // Rayleigh's median, per component
    }

    void measure_distortion() {
        const auto& loud = probe_.stairs[2];
        const auto edge = static_cast<std::size_t>(0.006 * rate_);
        const double fundamental = std::abs(phasor(loud.begin + edge, loud.end - edge, probe_.low_hz));
        double sum = 0.0;
        for (int number = 2; number <= 5; ++number)
            if (number * probe_.low_hz < 0.45 * rate_)
                sum += std::norm(phasor(loud.begin + edge, loud.end - edge, number * probe_.low_hz));
        const double ratio = std::sqrt(sum) / (fundamental + 1e-12);
        report_.distortion_db = units::db_from_ratio(ratio + 1e-12);
        if (ratio > clipped_ratio && report_.finding(PathFault::level_dependent) == nullptr)
            add(PathFault::clipped,
                fmt::format(
                    "{:.1f} % of distortion at the highest level: the output or the input is driven into its "
                    "limits. Turn the output or the input down and calibrate again.",
                    100.0 * ratio));
    }

    double magnitude(double hz) const {
        // A tenth of an octave around, so that noise and ripple do not decide.
        const auto first = static_cast<std::size_t>(hz * 0.966 / bin_hz_),
                   last = static_cast<std::size_t>(hz * 1.035 / bin_hz_) + 1;
        double sum = 0.0;
        for (std::size_t k = first; k <= std::min(last, transfer_.size() - 1); ++k)
            sum += std::norm(transfer_[k]);
        return std::sqrt(sum / static_cast<double>(last - first + 1));
    }

    void look_at_response() {
        const double at_997 = magnitude(997.0);
        double most = 0.0, where = 997.0;
        const double top_hz = std::min(15000.0, 0.40 * rate_);
        for (double hz = 110.0; hz < top_hz; hz *= 1.12) {
            const double off = units::db_from_ratio(magnitude(hz) / at_997 + 1e-12);
            if (std::abs(off) > std::abs(most)) {
                most = off;
                where = hz;
            }
        }
        report_.deviation_db = std::abs(most);
        if (report_.finding(PathFault::frames_lost) == nullptr &&
            report_.finding(PathFault::level_dependent) == nullptr &&
            std::abs(most) > flat_db + expectation_.deviation_db.value_or(0.0))
            add(PathFault::filtered,
                fmt::format(
                    "The path is not flat: {:+.1f} dB at {:.0f} Hz. A tone control or \"enhancement\" is on: "
                    "switch it off in the operating system and in the interface's mixer.",
                    most, where));
        // The lowest frequency from which on little passes.
        double edge_hz = 0.49 * rate_;
        for (double hz = 1000.0; hz < 0.489 * rate_; hz += 0.002 * rate_) {
            const auto bin = static_cast<std::size_t>(hz / bin_hz_);
            double sum = 0.0;
            constexpr std::size_t reach = 10;
            for (std::size_t k = bin - reach; k <= bin + reach; ++k) sum += std::norm(transfer_[k]);
            if (std::sqrt(sum / (2.0 * reach + 1.0)) > edge_ratio * at_997) continue;
            edge_hz = hz;
            break;
        }
        if (edge_hz > edge_of_rate * rate_) return;
        for (double inner_hz : common_rates_hz)
            if (inner_hz < rate_ && edge_hz > 0.43 * inner_hz && edge_hz < 0.515 * inner_hz)
                add(PathFault::resampled, fmt::format("The path runs at {:g} kHz inside, not at {:g} kHz: "
                                                      "nothing passes above {:.1f} kHz. Set "
                                                      "the device to the rig's rate in the operating system, "
                                                      "or name the device itself (docs/"
                                                      "rig.md).",
                                                      inner_hz / 1000.0, rate_ / 1000.0, edge_hz / 1000.0));
        if (report_.finding(PathFault::resampled) == nullptr && rate_ <= 96000.0)
            add(PathFault::filtered, fmt::format("Nothing passes above {:.1f} kHz, although the rate is {:g} "
                                                 "kHz: a filter or a resampler is "
                                                 "in the path.",
                                                 edge_hz / 1000.0, rate_ / 1000.0));
    }

    // An echo makes the logarithm of the response ripple along frequency: a line in its spectrum (Bogert,
    // Healy and Tukey 1963), far from the slow course that filters give it.
    void look_for_echo() {
        if (report_.finding(PathFault::frames_lost) != nullptr) return;
        const auto first = static_cast<std::size_t>(400.0 / bin_hz_),
                   last = static_cast<std::size_t>(std::min(15000.0, 0.36 * rate_) / bin_hz_);
        std::vector<double> logarithm;
        double mean = 0.0;
        for (std::size_t k = first; k < last; ++k) {
            logarithm.push_back(std::log(std::abs(transfer_[k]) + 1e-12));
            mean += logarithm.back();
        }
        mean /= static_cast<double>(logarithm.size());
        const auto window = spectrum::window_samples(spectrum::Window::blackman_harris, logarithm.size());
        double weight = 0.0;
        for (std::size_t k = 0; k < logarithm.size(); ++k) {
            logarithm[k] = (logarithm[k] - mean) * window[k];
            weight += window[k];
        }
        const std::size_t size = spectrum::fast_fft_size(4 * logarithm.size());
        const auto ripple = spectrum::forward_fft(logarithm, size);
        const double seconds_per_bin = 1.0 / (bin_hz_ * static_cast<double>(size));
        const auto nearest = static_cast<std::size_t>(0.0006 / seconds_per_bin),
                   farthest = std::min(ripple.size(), static_cast<std::size_t>(0.045 / seconds_per_bin));
        std::vector<double> sizes;
        double strongest = 0.0;
        std::size_t where = 0;
        for (std::size_t q = nearest; q < farthest; ++q) {
            sizes.push_back(2.0 / weight * std::abs(ripple[q]));
            if (sizes.back() > strongest) {
                strongest = sizes.back();
                where = q;
            }
        }
        if (strongest < std::max(echo_ratio, 9.0 * median(sizes))) return;
        add(PathFault::echo,
            fmt::format(
                "An echo {:.1f} dB down, {:.2f} ms later: the input is mixed back into the output. Turn "
                "monitoring "
                "off in the interface's mixer, and \"listen to this device\" in the operating system.",
                -units::db_from_ratio(strongest), 1000.0 * seconds_per_bin * static_cast<double>(where)));
    }

    static double folded(double hz, double rate_hz) {
        hz = std::fmod(std::abs(hz), rate_hz);
        return hz > 0.5 * rate_hz ? rate_hz - hz : hz;
    }

    // A resampler to a higher rate and back leaves mirror images of a tone near the band's end.
    void look_for_images() {
        const auto& high = probe_.high_tone;
        const auto edge = static_cast<std::size_t>(0.004 * rate_);
        const std::size_t begin = high.begin + edge, end = high.end - edge;
        const double tone = std::abs(phasor(begin, end, probe_.high_hz));
        if (tone < 1e-4) return;
        const double width_hz = rate_ / static_cast<double>(end - begin);
        double strongest = 0.0, inner = 0.0;
        for (double inner_hz : common_rates_hz) {
            if (std::abs(inner_hz - rate_) < 1.0 || inner_hz < 0.9 * rate_) continue;
            const double up = folded(rate_ - probe_.high_hz, inner_hz);
            for (double hz :
                 {folded(up, rate_), folded(inner_hz - up, rate_), folded(inner_hz - probe_.high_hz, rate_),
                  folded(inner_hz + probe_.high_hz, rate_)}) {
                if (hz < 500.0 || hz > 0.48 * rate_ || std::abs(hz - probe_.high_hz) < 8.0 * width_hz)
                    continue;
                bool harmonic = false;
                for (int number = 2; number <= 7; ++number)
                    harmonic =
                        harmonic || std::abs(folded(number * probe_.high_hz, rate_) - hz) < 6.0 * width_hz;
                if (harmonic) continue;
                const double size = std::abs(phasor(begin, end, hz));
                std::vector<double> beside;
                for (double away : {-9.0, -7.5, -6.0, -4.5, 4.5, 6.0, 7.5, 9.0})
                    beside.push_back(std::abs(phasor(begin, end, hz + away * width_hz)));
                if (size > std::max(image_ratio * tone, 7.0 * median(beside)) && size > strongest) {
                    strongest = size;
                    inner = inner_hz;
                }
            }
        }
        if (strongest > 0.0)
            add(PathFault::resampled, fmt::format("The path is resampled ({:g} kHz inside is likely): a tone "
                                                  "leaves a mirror image {:.0f} dB "
                                                  "down. Set the device to the rig's rate in the operating "
                                                  "system, or name the device itself "
                                                  "(docs/rig.md).",
                                                  inner / 1000.0, -units::db_from_ratio(strongest / tone)));
    }

    void look_at_polarity() {
        const auto response = band_response(400.0, 8000.0);
        double extreme = 0.0;
        for (double v : response)
            if (std::abs(v) > std::abs(extreme)) extreme = v;
        report_.polarity = extreme < 0.0 ? -1 : 1;
        if (report_.polarity < 0)
            add(PathFault::inverted,
                "The path turns the signal over: two legs are swapped in a cable or at an adapter between "
                "output and "
                "input. Put it right, or the unit's own polarity is told wrong.");
    }

    std::span<const double> x_;
    const PathProbe& probe_;
    const PathExpectation& expectation_;
    double rate_;
    long long lag_ = 0;  // of the probe's first frame
    std::vector<Complex> transfer_;
    std::size_t size_ = 0;
    double bin_hz_ = 1.0;
    PathReport report_;
};

}  // namespace

bool PathReport::honest() const noexcept {
    return std::none_of(findings.begin(), findings.end(), [](const PathFinding& one) { return one.spoils; });
}

const PathFinding* PathReport::finding(PathFault fault) const {
    const auto found = std::find_if(findings.begin(), findings.end(),
                                    [&](const PathFinding& one) { return one.fault == fault; });
    return found != findings.end() ? &*found : nullptr;
}

PathReport check_path(std::span<const double> recording, double rate_hz, double level_dbfs,
                      const PathExpectation& expectation) {
    const PathProbe probe = make_path_probe(rate_hz, level_dbfs);
    return PathLook(recording, probe, expectation).report();
}

}  // namespace coldpin::rig
