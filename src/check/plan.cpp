#include <algorithm>
#include <cctype>
#include <map>
#include <optional>

#include <fmt/core.h>

#include "coldpin/check/perform.h"
#include "coldpin/units/error.h"

#include "instructions.h"

namespace coldpin::check {

namespace {

using profile::PlanStep;
using rig::Feed;

constexpr double target_output_dbu = 4.0;
constexpr double harmless_drive_dbu = -60.0;   // for a unit whose gain nobody stated
constexpr double multitone_headroom_db = 6.0;  // its peak lies that far over a sine of its level at most
constexpr double converter_headroom_db = 0.5;

std::string slug(const std::string& text) {
    std::string out;
    for (char c : text)
        if (std::isalnum(static_cast<unsigned char>(c)) != 0) out += c;
    return out;
}

std::string joined(std::initializer_list<std::string> parts) {
    std::string out;
    for (const auto& part : parts)
        if (!part.empty()) out += (out.empty() ? "" : "-") + part;
    return out;
}

// Builds the captures of one profile on one rig.
class Planner {
  public:
    Planner(const profile::DeviceProfile& profile, const rig::Session& session)
        : profile_(profile), session_(session), setup_(session.setup()) {}

    CapturePlan build() {
        const std::vector<std::string> channels =
            profile_.channels.empty() ? std::vector<std::string>{""} : profile_.channels;
        for (std::size_t c = 0; c < channels.size(); ++c) {
            channel_ = channels[c];
            device_input_ =
                setup_.routing.device_inputs[std::min(c, setup_.routing.device_inputs.size() - 1)];
            for (const auto& setting : settings_in_plan()) plan_setting(setting);
        }
        require_unique_labels();
        for (const auto& capture : plan_.captures) session_.require_within_limits(capture.request);
        list_changes();
        return plan_;
    }

  private:
    struct Draft {  // a capture and the steps that use it
        PlannedCapture capture;
        std::vector<std::size_t> steps;
    };

    std::vector<std::string> settings_in_plan() const {
        std::vector<std::string> names;
        for (const auto& step : profile_.plan)
            if (std::find(names.begin(), names.end(), step.setting) == names.end())
                names.push_back(step.setting);
        return names;
    }

    std::optional<double> nominal_gain(const std::string& setting) const {
        const auto* found = profile_.find_setting(setting);
        return found != nullptr ? found->nominal_gain_db : std::nullopt;
    }

    double converter_limit_dbu(Feed feed) const {
        return -converter_headroom_db - session_.converter_level_dbfs(feed, 0.0);
    }

    // The drive that a step asks for, or the one for +4 dBu at the output, lowered to what the rig allows.
    double differential_drive(const PlanStep& step, double headroom_db) {
        if (step.drive_dbu) return *step.drive_dbu;
        const auto gain = nominal_gain(step.setting);
        const double wanted = gain ? target_output_dbu - *gain : harmless_drive_dbu;
        double allowed = std::min(wanted, converter_limit_dbu(Feed::differential) - headroom_db);
        if (setup_.limits.max_preamp_input_dbu)
            allowed = std::min(allowed, *setup_.limits.max_preamp_input_dbu - headroom_db);
        if (setup_.limits.max_preamp_output_dbu && gain)
            allowed = std::min(allowed, *setup_.limits.max_preamp_output_dbu - *gain - headroom_db);
        return allowed;
    }

    double common_mode_drive(const PlanStep& step, double headroom_db) const {
        if (step.common_mode_drive_dbu) return *step.common_mode_drive_dbu;
        double allowed = std::min(0.0, converter_limit_dbu(Feed::common_mode) - headroom_db);
        if (setup_.limits.max_preamp_common_mode_dbu)
            allowed = std::min(allowed, *setup_.limits.max_preamp_common_mode_dbu - headroom_db);
        return allowed;
    }

    signal::Stimulus sweep_for(const PlanStep& step) const {
        const double rate = setup_.audio.sample_rate_hz;
        signal::Stimulus stimulus;
        stimulus.kind = signal::Sweep{step.from_hz.value_or(10.0),
                                      std::min(step.to_hz.value_or(0.46 * rate), 0.48 * rate)};
        stimulus.length_s = step.length_s.value_or(4.0);
        return stimulus;
    }

    static signal::Stimulus tones_for(const std::vector<double>& frequencies_hz, double length_s) {
        signal::Stimulus stimulus;
        if (frequencies_hz.size() == 1)
            stimulus.kind = signal::Tone{frequencies_hz.front()};
        else
            stimulus.kind = signal::Multitone{frequencies_hz};
        stimulus.length_s = length_s;
        return stimulus;
    }

    Draft draft(const std::string& what, Feed feed, const signal::Stimulus& stimulus, double drive_dbu,
                const std::string& setting, std::size_t step) const {
        Draft made;
        auto& request = made.capture.request;
        made.capture.unit_channel = channel_;
        request.label = joined({what, slug(setting), slug(channel_)});
        request.feed = feed;
        request.stimulus = stimulus;
        request.stimulus.rate_hz = setup_.audio.sample_rate_hz;
        request.drive_dbu = drive_dbu;
        // Noise is measured with the pad as its source, so the plug stays there.
        request.wiring =
            session_.wiring_for(feed == Feed::idle ? Feed::differential : feed, setting, channel_);
        request.device_input = device_input_;
        request.expected_gain_db = nominal_gain(setting);
        made.steps.push_back(step);
        return made;
    }

    // Uses a draft that plays just the same, or adds this one.
    static void add(std::vector<Draft>& drafts, Draft&& made) {
        for (Draft& other : drafts) {
            auto &a = other.capture.request, &b = made.capture.request;
            if (a.feed != b.feed || a.drive_dbu != b.drive_dbu) continue;
            if (a.feed == Feed::idle) {
                a.stimulus.length_s = std::max(a.stimulus.length_s, b.stimulus.length_s);
            } else if (!(a.stimulus == b.stimulus)) {
                continue;
            }
            other.steps.insert(other.steps.end(), made.steps.begin(), made.steps.end());
            return;
        }
        drafts.push_back(std::move(made));
    }

    void draft_step(const PlanStep& step, std::size_t index, std::vector<Draft>& pad,
                    std::vector<Draft>& idle, std::vector<Draft>& feed) {
        if (step.measure == "gain" || step.measure == "distortion") {
            // The same tone serves both: the first to come names the recording.
            const auto tones = step.frequencies_hz.empty() ? std::vector<double>{997.0} : step.frequencies_hz;
            for (double hz : tones)
                add(pad, draft(joined({step.measure, tones.size() > 1 ? fmt::format("{:g}Hz", hz) : ""}),
                               Feed::differential, tones_for({hz}, step.length_s.value_or(1.0)),
                               differential_drive(step, 0.0), step.setting, index));
        } else if (step.measure == "noise" || step.measure == "hum") {
            signal::Stimulus silence;
            silence.length_s = step.length_s.value_or(4.0);
            add(idle, draft("idle", Feed::idle, silence, 0.0, step.setting, index));
        } else if (step.measure == "cmrr") {
            const auto tones =
                step.frequencies_hz.empty() ? std::vector<double>{85.0, 997.0, 9973.0} : step.frequencies_hz;
            const bool sweep = step.stimulus == "sweep";
            const double headroom_db = sweep || tones.size() == 1 ? 0.0 : multitone_headroom_db;
            const auto stimulus = sweep ? sweep_for(step) : tones_for(tones, step.length_s.value_or(3.0));
            add(pad, draft("differential", Feed::differential, stimulus,
                           differential_drive(step, headroom_db), step.setting, index));
            add(feed, draft("common-mode", Feed::common_mode, stimulus, common_mode_drive(step, headroom_db),
                            step.setting, index));
        } else {
            // Polarity and latency take whatever sweep the response uses at this setting.
            const auto response =
                std::find_if(profile_.plan.begin(), profile_.plan.end(), [&](const PlanStep& one) {
                    return one.measure == "response" && one.setting == step.setting;
                });
            const bool borrow = step.measure != "response" && response != profile_.plan.end();
            const PlanStep& source = borrow ? *response : step;
            add(pad, draft("sweep", Feed::differential, sweep_for(source), differential_drive(source, 0.0),
                           step.setting, index));
        }
    }

    void plan_setting(const std::string& setting) {
        std::vector<Draft> pad, idle, feed;
        // Gain first: noise and hum refer to it.
        for (const bool gain : {true, false})
            for (std::size_t i = 0; i < profile_.plan.size(); ++i)
                if (profile_.plan[i].setting == setting && (profile_.plan[i].measure == "gain") == gain)
                    draft_step(profile_.plan[i], i, pad, idle, feed);
        // A rig with one output begins where its plug is, so that it moves once a setting.
        const bool feed_first = !setup_.routing.common_mode_output && !plan_.captures.empty() &&
                                plan_.captures.back().request.wiring.plug == rig::Plug::common_mode_feed;
        std::map<std::size_t, std::vector<std::size_t>> used;  // plan step -> captures
        const auto take = [&](std::vector<Draft>& drafts) {
            for (Draft& one : drafts) {
                for (std::size_t step : one.steps) used[step].push_back(plan_.captures.size());
                plan_.captures.push_back(std::move(one.capture));
            }
        };
        if (feed_first) take(feed);
        take(pad);
        take(idle);
        if (!feed_first) take(feed);
        for (std::size_t i = 0; i < profile_.plan.size(); ++i) {
            if (profile_.plan[i].setting != setting) continue;
            auto captures = used[i];
            // The differential recording of a pair comes first, whichever was taken first.
            std::stable_sort(captures.begin(), captures.end(), [&](std::size_t a, std::size_t b) {
                return plan_.captures[a].request.feed != Feed::common_mode &&
                       plan_.captures[b].request.feed == Feed::common_mode;
            });
            plan_.steps.push_back({i, channel_, setting, captures});
        }
    }

    void require_unique_labels() {
        std::map<std::string, int> seen;
        for (auto& capture : plan_.captures) {
            const int count = ++seen[capture.request.label];
            if (count > 1) capture.request.label += fmt::format("-{}", count);
        }
    }

    void list_changes() {
        for (std::size_t i = 1; i < plan_.captures.size(); ++i) {
            const auto sentences =
                instructions(plan_.captures[i - 1].request.wiring, plan_.captures[i].request.wiring, setup_);
            plan_.changes.insert(plan_.changes.end(), sentences.begin(), sentences.end());
        }
    }

    const profile::DeviceProfile& profile_;
    const rig::Session& session_;
    const rig::Setup& setup_;
    std::string channel_;
    int device_input_ = 1;
    CapturePlan plan_;
};

}  // namespace

CapturePlan plan_captures(const profile::DeviceProfile& profile, const rig::Session& session) {
    return Planner(profile, session).build();
}

}  // namespace coldpin::check
