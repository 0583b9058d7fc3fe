// Real discrete Fourier transforms (FFTW3, double), with plans cached and shared by size.
//
// Plans are made with FFTW_ESTIMATE on aligned memory: no timing runs, so the same samples always give the
// same bits. Planner calls are serialised; executing is safe from several threads at once. May allocate.
#pragma once

#include <complex>
#include <cstddef>
#include <span>
#include <vector>

namespace coldpin::spectrum {

// X[k] = sum x[n] exp(-2 pi i k n / N) for k = 0 ... N/2 (N/2 + 1 values). When `size` exceeds the samples
// they are padded with zeros; size 0 means the samples' own. Throws UsageError when size < samples or is 0.
std::vector<std::complex<double>> forward_fft(std::span<const double> samples, std::size_t size = 0);

// The inverse, scaled by 1/N, so that inverse_fft(forward_fft(x), N) == x to rounding. `bins` holds N/2 + 1.
std::vector<double> inverse_fft(std::span<const std::complex<double>> bins, std::size_t size);

// The smallest size >= n of the form 2^a 3^b 5^c that FFTW handles fast.
std::size_t fast_fft_size(std::size_t n);

// For repeated transforms of one size without allocating: in() is filled by the caller, run() gives out().
class FftWorkspace {
  public:
    explicit FftWorkspace(std::size_t size);
    ~FftWorkspace();
    FftWorkspace(FftWorkspace&&) noexcept;
    FftWorkspace& operator=(FftWorkspace&&) noexcept;
    std::span<double> in() noexcept;
    std::span<const std::complex<double>> run() noexcept;

  private:
    struct State;
    State* state_;
};

}  // namespace coldpin::spectrum
