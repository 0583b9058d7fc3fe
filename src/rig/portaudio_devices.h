// PortAudio's device list behind the rig's names.
#pragma once

#include <string>
#include <vector>

#include <portaudio.h>

#include "coldpin/rig/setup.h"

namespace coldpin::rig {

// Pa_Initialize and Pa_Terminate as one object's life. All Pa_ calls come from the thread that makes it.
class PortAudioLibrary {
  public:
    PortAudioLibrary();  // throws CannotMeasure
    ~PortAudioLibrary();
    PortAudioLibrary(const PortAudioLibrary&) = delete;
    PortAudioLibrary& operator=(const PortAudioLibrary&) = delete;
};

std::string host_api_name(const PaDeviceInfo& info);

// The device named exactly, or the only one whose name holds the words; throws UsageError naming the devices
// that come near, or all there are (CannotMeasure when none fits).
PaDeviceIndex find_device(const std::string& name, const std::string& host_api, bool for_input);

}  // namespace coldpin::rig
