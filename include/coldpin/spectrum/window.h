// Cosine-sum windows and their figures. Periodic form: w[j] = sum (-1)^m c_m cos(2 pi m j / N).
// Coefficients: Harris 1978; HFT windows: Heinzel, Ruediger, Schilling 2002.
#pragma once

#include <cstddef>
#include <vector>

namespace coldpin::spectrum {

enum class Window { rectangular, hann, blackman_harris, flat_top_hft90d, flat_top_hft144d };

std::vector<double> window_samples(Window window, std::size_t size);

// Equivalent noise bandwidth in bins: N sum(w^2) / (sum w)^2.
double noise_bandwidth_bins(const std::vector<double>& window);
// Mean over peak.
double coherent_gain(const std::vector<double>& window);
// Half width of the main lobe in bins: what to keep away from a line.
double main_lobe_half_width_bins(Window window);

}  // namespace coldpin::spectrum
