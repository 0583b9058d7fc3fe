"""What scipy makes of the samples it is given: an independent judge for the tests beside this file.

    scipy_reference.py welch  SAMPLES.f64 RATE SEGMENT     averaged density, Blackman-Harris, three quarters overlap
    scipy_reference.py fft    SAMPLES.f64                  real and imaginary parts of rfft
    scipy_reference.py device SAMPLES.f64 RATE             the samples through a Butterworth band-pass, then freqz of it
    scipy_reference.py there_and_back SAMPLES.f64 UP DOWN  polyphase resampling to UP/DOWN of the rate and back
    scipy_reference.py resample SAMPLES.f64 COUNT          Fourier resampling to so many samples

Numbers go to standard output as little-endian doubles. Samples are little-endian doubles.
"""
import sys

import numpy as np
from scipy import signal

kind, path = sys.argv[1], sys.argv[2]
samples = np.fromfile(path, dtype="<f8")

if kind == "welch":
    rate, segment = float(sys.argv[3]), int(sys.argv[4])
    window = signal.get_window("blackmanharris", segment)  # periodic form
    _, out = signal.welch(samples, rate, window=window, noverlap=segment * 3 // 4, detrend="constant", scaling="density")
elif kind == "fft":
    bins = np.fft.rfft(samples)
    out = np.column_stack([bins.real, bins.imag]).ravel()
elif kind == "device":
    rate = float(sys.argv[3])
    sections = signal.butter(2, [30.0, 15000.0], btype="bandpass", fs=rate, output="sos")
    filtered = signal.sosfilt(sections, samples)
    frequencies = 20.0 * 1000.0 ** (np.arange(0, 61) / 60.0)
    _, response = signal.sosfreqz(sections, worN=frequencies, fs=rate)
    out = np.concatenate([filtered, 20.0 * np.log10(np.abs(response))])
elif kind == "there_and_back":
    up, down = int(sys.argv[3]), int(sys.argv[4])
    out = signal.resample_poly(signal.resample_poly(samples, up, down), down, up)[: len(samples)]
elif kind == "resample":
    out = signal.resample(samples, int(sys.argv[3]))
else:
    sys.exit("unknown kind")

sys.stdout.buffer.write(np.asarray(out, dtype="<f8").tobytes())
