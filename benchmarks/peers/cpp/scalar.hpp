// What the plain C++ programs share. They are written as a control engineer writes a fast simulation of one loop: one
// trial after the other, doubles, the standard library's generator and mathematics, the trials divided among threads.
#pragma once

#include <algorithm>
#include <cmath>
#include <cstdint>
#include <random>
#include <thread>
#include <vector>

/// Calls body(first, last, worker) on every thread for its share of the trials.
template <class Body> void divide_trials(long trials, int threads, Body body) {
    std::vector<std::thread> others;
    for (int i = 1; i < threads; ++i) others.emplace_back(body, trials * i / threads, trials * (i + 1) / threads, i);
    body(0, trials / threads, 0);
    for (std::thread& t : others) t.join();
}

/// Standard normal numbers, or zeros where a trial has no noise.
template <bool Noise> class normal_numbers {
public:
    explicit normal_numbers(std::uint64_t seed) : generator_(seed) {}
    double operator()() {
        if constexpr (Noise) return distribution_(generator_);
        return 0.0;
    }

private:
    std::mt19937_64 generator_;
    std::normal_distribution<double> distribution_;
};

/// Current observer of order 2 with zero-order hold and all poles at exp(-omega_o Ts).
struct extended_observer {
    double ts, l1, l2, l3, x1 = 0.0, x2 = 0.0, x3 = 0.0;

    extended_observer(double bandwidth, double sample_period) : ts(sample_period) {
        const double z = std::exp(-bandwidth * ts), d = 1.0 - z;
        l1 = 1.0 - z * z * z;
        l2 = 1.5 * d * d * (1.0 + z) / ts;
        l3 = d * d * d / (ts * ts);
    }
    /// `drive`: b0 times the command of the last sample.
    void update(double measured, double drive) {
        const double top = x3 + drive;
        x1 += ts * (x2 + 0.5 * ts * top);
        x2 += ts * top;
        const double innovation = measured - x1;
        x1 += l1 * innovation;
        x2 += l2 * innovation;
        x3 += l3 * innovation;
    }
};

inline double quantise(double x, double resolution) { return std::floor(x / resolution + 0.5) * resolution; }
