// Tape: a program made ready to run over a block of trials, one instruction over all lanes at a time.
//
// Made once per block workspace: values that depend on numbers alone are computed once per block, values that depend on
// nothing that moves during an integration step once per step; division by such a value becomes multiplication by its
// reciprocal, a value used once joins the operation that uses it (every operation still rounds, as written), and values
// share as few signals as their lifetimes allow. The digits depend on the program alone, never on the block.
#pragma once

#include <array>
#include <utility>
#include <vector>

#include <windage/lanes/signal.hpp>
#include <windage/plant/program.hpp>

namespace windage {

class tape {
public:
    enum class outputs { as_written, scaled };

    /// With `outputs::scaled` every output is multiplied by the signal bound with `bind_scale` (a step length).
    /// `held` tells of each input whether it keeps its value between two calls of `begin_step`; none where empty.
    tape(const program& source, signal_arena& arena, outputs mode, const std::vector<bool>& held = {});

    /// Binds input `index` of the program to a signal. Inputs that are numbers bind themselves in `begin`.
    void bind_input(std::size_t index, constant_signal values) { bind(input_slot_[index], values); }
    /// Binds output `index` to the signal that `run` writes.
    void bind_output(std::size_t index, signal values) { slots_[output_slot_[index]] = values; }
    void bind_scale(constant_signal values) { bind(input_slot_.back(), values); }

    /// Fills the numbers and runs the prologue.
    void begin(const trial_block& block);
    /// Computes what depends on held inputs and the scale; before the first `run` after one of them has changed.
    void begin_step() const { execute(once_a_step_); }
    /// Computes all outputs from the bound inputs; outputs must not overlap inputs.
    void run() const { execute(body_); }

private:
    friend class tape_builder;
    static constexpr int most_operands = 5; // of two joined operations
    /// Computes slots[at[0]] from slots[at[1]], slots[at[2]], ...
    using kernel = void (*)(const signal* slots, const int* at, std::size_t size);
    struct step {
        kernel run;
        std::array<int, 1 + most_operands> at;
    };

    void bind(int slot, constant_signal values) { slots_[slot] = const_cast<signal>(values); } // inputs are only read
    void execute(const std::vector<step>& steps) const;
    static kernel kernel_of(operation op);
    /// For `then` with the result of `first` as its operand `place`; null where the two are not joined.
    static kernel kernel_of(operation first, operation then, int place);

    std::size_t size_;
    std::vector<signal> slots_;
    std::vector<int> input_slot_, output_slot_;
    std::vector<step> prologue_, once_a_step_, body_;
    std::vector<std::pair<int, double>> constants_; // slot, value
    std::vector<std::pair<int, number>> numbers_;   // slot, number
};

} // namespace windage
