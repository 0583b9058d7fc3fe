#include "coldpin/rig/backend.h"

#include "backends.h"

namespace coldpin::rig {

std::string feed_name(Feed feed) {
    switch (feed) {
        case Feed::differential:
            return "differential";
        case Feed::common_mode:
            return "common-mode";
        case Feed::idle:
            break;
    }
    return "idle";
}

std::optional<Feed> feed_from_name(const std::string& name) {
    for (Feed feed : {Feed::differential, Feed::common_mode, Feed::idle})
        if (name == feed_name(feed)) return feed;
    return std::nullopt;
}

std::unique_ptr<Backend> open_backend(const Setup& setup) {
    switch (setup.audio.backend) {
        case BackendKind::simulated:
            return make_simulated_backend(setup);
        case BackendKind::stored:
            return make_stored_backend(setup);
        case BackendKind::portaudio:
            break;
    }
    return make_portaudio_backend(setup);
}

}  // namespace coldpin::rig
