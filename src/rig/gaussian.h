// Seeded Gaussian noise, the same on every machine (std::normal_distribution is not).
#pragma once

#include <cmath>
#include <cstdint>

namespace coldpin::rig {

class Gaussian {
  public:
    explicit Gaussian(std::uint64_t seed) noexcept : state_(seed * 0x9E3779B97F4A7C15ULL + 0x1234567) {}

    // Mean 0, variance 1 (Marsaglia's polar method).
    double operator()() noexcept {
        if (has_spare_) {
            has_spare_ = false;
            return spare_;
        }
        double u = 0.0, v = 0.0, s = 0.0;
        do {
            u = 2.0 * uniform() - 1.0;
            v = 2.0 * uniform() - 1.0;
            s = u * u + v * v;
        } while (s >= 1.0 || s == 0.0);
        const double factor = std::sqrt(-2.0 * std::log(s) / s);
        spare_ = v * factor;
        has_spare_ = true;
        return u * factor;
    }

  private:
    // splitmix64 (Steele, Lea, Flood 2014).
    double uniform() noexcept {
        state_ += 0x9E3779B97F4A7C15ULL;
        std::uint64_t z = state_;
        z = (z ^ (z >> 30U)) * 0xBF58476D1CE4E5B9ULL;
        z = (z ^ (z >> 27U)) * 0x94D049BB133111EBULL;
        return static_cast<double>((z ^ (z >> 31U)) >> 11U) * 0x1.0p-53;
    }
    std::uint64_t state_;
    double spare_ = 0.0;
    bool has_spare_ = false;
};

}  // namespace coldpin::rig
