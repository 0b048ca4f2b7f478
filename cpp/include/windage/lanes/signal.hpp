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
    /// Signals taken so far.
    std::size_t signals() const { return signals_; }

    /// One signal, set to zero.
    signal take() { return take(1); }
    /// `count` signals next to each other, set to zero.
    signal take(std::size_t count) {
        signals_ += count;
        return take_values(count * block_size_);
    }
    /// Room for `count` packs, set to zero.
    double* take_packs(std::size_t count) { return take_values(count * lanes); }

private:
    static constexpr std::size_t chunk_signals = 32;
    static constexpr std::align_val_t alignment{128};
    struct release {
        void operator()(double* p) const { ::operator delete[](p, alignment); }
    };

    double* take_values(std::size_t wanted) {
        if (wanted > left_) grow(wanted);
        signal s = next_;
        next_ += wanted;
        left_ -= wanted;
        return s;
    }

    void grow(std::size_t wanted) {
        left_ = wanted > chunk_signals * block_size_ ? wanted : chunk_signals * block_size_;
        chunks_.emplace_back(new (alignment) double[left_]());
        next_ = chunks_.back().get();
    }

    std::size_t block_size_, signals_ = 0;
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

/// A quantity that stays as it is while a block runs. Where it is the same in every lane it takes one pack, which keeps
/// the first-level cache for what moves.
class held_value {
public:
    held_value(bool is_same, signal_arena& arena)
        : values_(is_same ? arena.take_packs(1) : arena.take()), size_(is_same ? lanes : arena.block_size()),
          which_(is_same ? 0 : ~std::size_t(0)) {}

    /// Stores f(i), a pack or a number, for the offset of each pack; f reads values that differ only where this one
    /// may.
    template <class F> WINDAGE_INLINE void fill(F&& f) {
        for (std::size_t i = 0; i < size_; i += lanes) wide(f(i)).store(values_ + i);
    }
    WINDAGE_INLINE wide pack_at(std::size_t i) const { return wide::load(values_ + (i & which_)); }
    /// The same; with `Same` for a value that is the same in every lane, from one number instead of a pack.
    template <bool Same> WINDAGE_INLINE wide read(std::size_t i) const {
        if constexpr (Same) return wide(values_[0]);
        return pack_at(i);
    }
    double operator[](std::size_t lane) const { return values_[lane & which_]; }
    void set(std::size_t i, wide x) { x.store(values_ + (i & which_)); }
    /// The same in every lane.
    bool is_same() const { return which_ == 0; }
    void copy_to(signal to, std::size_t size) const {
        for_each_pack(size, [&](std::size_t i) WINDAGE_LANE_LOOP { pack_at(i).store(to + i); });
    }

private:
    double* values_;
    std::size_t size_, which_;
};

/// A number of the description: the constant or the drawn parameter of each lane.
class lane_value : public held_value {
public:
    lane_value(number source, signal_arena& arena) : held_value(source.is_constant(), arena), source_(source) {}

    void begin(const trial_block& block) {
        if (source_.is_constant()) return fill([&](std::size_t) { return source_.value; });
        const double* drawn = block.parameters + source_.parameter * block.size;
        fill([&](std::size_t i) { return wide::load(drawn + i); });
    }
    bool is_constant() const { return source_.is_constant(); }
    bool is_constant(double x) const { return source_.is_constant(x); }

private:
    number source_;
};

/// A small matrix of held values, its entries row by row.
class held_matrix {
public:
    held_matrix(int rows, int columns, bool is_same, signal_arena& arena)
        : columns_(std::size_t(columns)), stride_(is_same ? lanes : arena.block_size()),
          which_(is_same ? 0 : ~std::size_t(0)),
          values_(is_same ? arena.take_packs(std::size_t(rows) * columns_) : arena.take(std::size_t(rows) * columns_)) {
    }

    WINDAGE_INLINE wide pack_at(int row, int column, std::size_t i) const {
        return wide::load(values_ + (std::size_t(row) * columns_ + std::size_t(column)) * stride_ + (i & which_));
    }
    void set(int row, int column, std::size_t i, wide x) {
        x.store(values_ + (std::size_t(row) * columns_ + std::size_t(column)) * stride_ + (i & which_));
    }
    bool is_same() const { return which_ == 0; }

private:
    std::size_t columns_, stride_, which_;
    double* values_;
};

/// None of the values differs between lanes.
template <class... Values> bool are_same(const Values&... values) { return (values.is_same() && ...); }

/// Calls f(i, a, b, ...) for each pack, with the packs of held values. Where none of them differs between lanes they
/// are read once and stay in registers: loads are what a pass over a block waits for (measured).
template <class F, class... Values>
WINDAGE_INLINE void for_each_pack_with(std::size_t block_size, F&& f, const Values&... values) {
    if (are_same(values...))
        [&](const auto... once) WINDAGE_LANE_LOOP {
            for (std::size_t i = 0; i < block_size; i += lanes) f(i, once...);
        }(values.template read<true>(0)...);
    else
        for (std::size_t i = 0; i < block_size; i += lanes) f(i, values.template read<false>(i)...);
}

} // namespace windage
