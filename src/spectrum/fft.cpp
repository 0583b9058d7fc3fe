#include "coldpin/spectrum/fft.h"

#include <algorithm>
#include <map>
#include <mutex>

#include <fftw3.h>

#include "coldpin/units/error.h"

namespace coldpin::spectrum {

namespace {

// FFTW's planner is the one part of it that is not thread-safe. Plans live as long as the process: a bench
// uses a handful of sizes, over and over.
std::mutex planner;

struct Plans {
    fftw_plan forward = nullptr;
    fftw_plan inverse = nullptr;
};

template <typename T>
struct Aligned {
    explicit Aligned(std::size_t count) : data(static_cast<T*>(fftw_malloc(sizeof(T) * count))) {
        if (data == nullptr) throw std::bad_alloc();
    }
    ~Aligned() { fftw_free(data); }
    Aligned(const Aligned&) = delete;
    Aligned& operator=(const Aligned&) = delete;
    T* data;
};

Plans plans_for(std::size_t size) {
    // Never destroyed: threads may still transform while the program ends, and plans are freed with the
    // process.
    static auto& cache = *new std::map<std::size_t, Plans>;
    const std::lock_guard lock(planner);
    auto& plans = cache[size];
    if (plans.forward == nullptr) {
        const Aligned<double> real(size);
        const Aligned<fftw_complex> bins(size / 2 + 1);
        const int n = static_cast<int>(size);
        plans.forward = fftw_plan_dft_r2c_1d(n, real.data, bins.data, FFTW_ESTIMATE);
        plans.inverse = fftw_plan_dft_c2r_1d(n, bins.data, real.data, FFTW_ESTIMATE);
    }
    return plans;
}

std::complex<double>* as_complex(fftw_complex* bins) {
    return reinterpret_cast<std::complex<double>*>(bins);
}

}  // namespace

std::vector<std::complex<double>> forward_fft(std::span<const double> samples, std::size_t size) {
    if (size == 0) size = samples.size();
    if (size == 0 || size < samples.size())
        throw UsageError("a transform needs samples, and a size that holds them");
    const Plans plans = plans_for(size);
    const Aligned<double> real(size);
    const Aligned<fftw_complex> bins(size / 2 + 1);
    std::copy(samples.begin(), samples.end(), real.data);
    std::fill(real.data + samples.size(), real.data + size, 0.0);
    fftw_execute_dft_r2c(plans.forward, real.data, bins.data);
    return {as_complex(bins.data), as_complex(bins.data) + size / 2 + 1};
}

std::vector<double> inverse_fft(std::span<const std::complex<double>> bins, std::size_t size) {
    if (size == 0 || bins.size() != size / 2 + 1)
        throw UsageError("an inverse transform needs size/2 + 1 bins");
    const Plans plans = plans_for(size);
    const Aligned<double> real(size);
    const Aligned<fftw_complex> copy(bins.size());  // the transform destroys its input
    std::copy(bins.begin(), bins.end(), as_complex(copy.data));
    fftw_execute_dft_c2r(plans.inverse, copy.data, real.data);
    std::vector<double> samples(real.data, real.data + size);
    const double scale = 1.0 / static_cast<double>(size);
    for (double& x : samples) x *= scale;
    return samples;
}

std::size_t fast_fft_size(std::size_t n) {
    std::size_t best = 1;
    while (best < n) best *= 2;
    for (std::size_t five = 1; five < 2 * n && five <= 625; five *= 5) {
        for (std::size_t three = five; three < 2 * n && three <= five * 243; three *= 3) {
            std::size_t size = three;
            while (size < n) size *= 2;
            best = std::min(best, size);
        }
    }
    return best;
}

struct FftWorkspace::State {
    explicit State(std::size_t n) : size(n), plans(plans_for(n)), real(n), bins(n / 2 + 1) {
        std::fill(real.data, real.data + n, 0.0);
    }
    std::size_t size;
    Plans plans;
    Aligned<double> real;
    Aligned<fftw_complex> bins;
};

FftWorkspace::FftWorkspace(std::size_t size) : state_(nullptr) {
    if (size == 0) throw UsageError("a transform needs samples");
    state_ = new State(size);
}
FftWorkspace::~FftWorkspace() {
    delete state_;
}
FftWorkspace::FftWorkspace(FftWorkspace&& other) noexcept : state_(other.state_) {
    other.state_ = nullptr;
}
FftWorkspace& FftWorkspace::operator=(FftWorkspace&& other) noexcept {
    std::swap(state_, other.state_);
    return *this;
}
std::span<double> FftWorkspace::in() noexcept {
    return {state_->real.data, state_->size};
}
std::span<const std::complex<double>> FftWorkspace::run() noexcept {
    fftw_execute_dft_r2c(state_->plans.forward, state_->real.data, state_->bins.data);
    return {as_complex(state_->bins.data), state_->size / 2 + 1};
}

}  // namespace coldpin::spectrum
