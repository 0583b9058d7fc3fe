// What may be claimed of a common-mode rejection from a residual, its noise and the fixture's own balance.
#pragma once

#include <optional>
#include <vector>

#include "coldpin/measure/cmrr.h"

namespace coldpin::measure {

// Amplitude of the residual as detected, noise included, and the standard deviation of each quadrature.
struct Residual {
    double raw = 0.0;
    double std = 0.0;
    // Without the bias that noise adds to the square.
    double amplitude() const noexcept;
    bool stands_out() const noexcept;
    // Exceeds the true amplitude in 95 cases of 100, whatever that is: |A + noise| is never less than A plus
    // the noise in its own direction, so that P(raw < A - 1.645 std) <= 5 %.
    double at_most() const noexcept { return raw + 1.645 * std; }
    Residual operator*(double factor) const noexcept { return {raw * factor, std * factor}; }
};

struct Claim {
    double value_db = 0.0;
    double uncertainty_db = 0.0;
    Bound bound = Bound::exact;
};

// residual: common-mode gain re differential gain. known_db: expanded uncertainty of the drives and of the
// differential gain. limit_db: rejection that the fixture's own imbalance alone would show.
Claim claim_from(const Residual& residual, double known_db, std::optional<double> limit_db);

double drive_uncertainty_db(const CmrrQuestion& question);
double drive_ratio(const CmrrQuestion& question);  // differential over common mode

void add_figure(Findings& findings, const Claim& claim, double frequency_hz, const CmrrQuestion& question);
void add_curve(Findings& findings, const std::vector<double>& frequencies_hz,
               const std::vector<Claim>& claims);

// The common-mode samples with the leakage taken off, as long as both last. CannotMeasure when nothing is
// left: then both are the same recording.
std::vector<double> without_leakage(const CmrrQuestion& question);

}  // namespace coldpin::measure
