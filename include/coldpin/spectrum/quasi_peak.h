// The quasi-peak meter of ITU-R BS.468-4: its network, and the detector that reads how much bursts annoy.
#pragma once

#include <cstddef>
#include <span>
#include <vector>

namespace coldpin::spectrum {

// The detector alone, on samples that come one by one at a steady rate: rectified, then two peak-holding
// stages in a row (charge 1.41 ms and 161 ms, discharge 322 ms and 711 ms, fitted to the standard's tables of
// single and repeated bursts). A steady sine reads its RMS. Rates of 88 kHz and more, or the peaks of what
// lies near the band's end are missed. Not for several threads at once.
class QuasiPeakDetector {
  public:
    explicit QuasiPeakDetector(double rate_hz);
    void take(double sample) noexcept {
        const double size = sample < 0.0 ? -sample : sample;
        fast_ = size > fast_ ? fast_ + fast_charge_ * (size - fast_) : fast_ * fast_hold_;
        slow_ = fast_ > slow_ ? slow_ + slow_charge_ * (fast_ - slow_) : slow_ * slow_hold_;
    }
    double reading() const noexcept { return slow_ * scale_; }

  private:
    double fast_charge_, fast_hold_, slow_charge_, slow_hold_;
    double fast_ = 0.0, slow_ = 0.0, scale_ = 1.0;
};

// A whole recording through network and detector, oversampled to 88 kHz or more within [low, high] Hz.
// `readings`: the highest in each stretch of 0.1 s. Throws UsageError for rates below 32 kHz (the network's
// band would be cut) or fewer than 0.1 s.
struct QuasiPeakReading {
    double highest = 0.0;  // sample units, RMS of a sine that reads the same
    std::vector<double> readings;
};
QuasiPeakReading quasi_peak_468(std::span<const double> samples, double rate_hz, double low_hz,
                                double high_hz);

}  // namespace coldpin::spectrum
