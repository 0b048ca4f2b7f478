// A noise that changes at each sample and is held in between: white, or first-order Gauss-Markov.
#pragma once

#include <vector>

#include <windage/loop/clock.hpp>
#include <windage/loop/description.hpp>
#include <windage/loop/noise.hpp>

namespace windage {

class sampled_noise {
public:
    sampled_noise(const noise_description& d, const sample_clock& clock, signal_arena& arena);

    void begin(const trial_block& block);
    /// Moves on to sample k; samples must be asked for in order 0, 1, 2, ...
    void sample(std::int64_t k);
    constant_signal now() const { return now_; }

private:
    void begin_gauss_markov();

    noise_kind kind_;
    const sample_clock& clock_;
    std::size_t size_;
    std::vector<lane_value> numbers_;
    white_noise noise_;
    signal now_;
    held_value keep_, gain_; // w_{k+1} = keep * w_k + gain * n
};

} // namespace windage
