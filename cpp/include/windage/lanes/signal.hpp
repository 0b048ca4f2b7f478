// Signals: one quantity of a block of trials, a run of doubles that fills whole packs and starts on a cache line.
// The arena hands them out side by side, so that a block of trials stays in the first-level cache.
// Signals live as long as their arena; nothing is allocated while trials run.
#pragma once

#include <cstddef>
#include <cstdint>
#include <memory>
#include <new>
#include <vector>

#include <windage/lanes/number.hpp>
#include <windage/lanes/pack.hpp>

namespace windage {

using signal = double*;
using constant_signal = const double*;

class signal_arena {
public:
    /// `block_size`: trials of a block, a multiple of the pack width.
    explicit signal_arena(std::size_t block_size) : block_size_(block_size) {}

    std::size_t block_size() const { return block_size_; }

    /// One signal, set to zero.
    signal take() { return take(1); }

    /// `count` signals next to each other, set to zero.
    signal take(std::size_t count) {
        const std::size_t wanted = count * block_size_;
        if (wanted > left_) grow(wanted);
        signal s = next_;
        next_ += wanted;
        left_ -= wanted;
        return s;
    }

private:
    static constexpr std::size_t chunk_signals = 32;
    static constexpr std::align_val_t alignment{128};
    struct release {
        void operator()(double* p) const { ::operator delete[](p, alignment); }
    };

    void grow(std::size_t wanted) {
        left_ = wanted > chunk_signals * block_size_ ? wanted : chunk_signals * block_size_;
        chunks_.emplace_back(new (alignment) double[left_]());
        next_ = chunks_.back().get();
    }

    std::size_t block_size_;
    std::vector<std::unique_ptr<double[], release>> chunks_;
    double* next_ = nullptr;
    std::size_t left_ = 0;
};

/// Calls f(i) for the offset of each pack of a block.
template <class F> WINDAGE_INLINE void for_each_pack(std::size_t block_size, F&& f) {
    for (std::size_t i = 0; i < block_size; i += lanes) f(i);
}

/// The trials that a block simulates: one index a lane, and their drawn parameters.
struct trial_block {
    std::size_t size = 0;                  ///< lanes, a multiple of the pack width
    std::uint64_t seed = 0;                ///< of the study
    const std::uint64_t* trials = nullptr; ///< trial index of each lane
    const double* parameters = nullptr;    ///< parameter p of lane i at [p * size + i]
};

/// A number of the description as a signal: the constant or the drawn parameter of each lane.
class lane_value {
public:
    lane_value(number source, signal_arena& arena) : source_(source), values_(arena.take()) {}

    void begin(const trial_block& block) {
        for (std::size_t i = 0; i < block.size; ++i)
            values_[i] = source_.is_constant() ? source_.value : block.parameters[source_.parameter * block.size + i];
    }
    bool is_constant() const { return source_.is_constant(); }
    bool is_constant(double x) const { return source_.is_constant(x); }
    wide pack_at(std::size_t i) const { return wide::load(values_ + i); }
    double operator[](std::size_t lane) const { return values_[lane]; }
    constant_signal data() const { return values_; }

private:
    number source_;
    signal values_;
};

} // namespace windage
