// Tape: a program made ready to run over a block of trials, one instruction over all lanes at a time.
//
// Made once per block workspace: values that depend on numbers alone move to a prologue that runs once per block,
// division by such a value becomes multiplication by its reciprocal, a product used once joins the sum that uses it
// (two roundings, as written), and values share as few signals as their lifetimes allow.
// The digits depend on the program alone, never on the block.
#pragma once

#include <utility>
#include <vector>

#include <windage/lanes/signal.hpp>
#include <windage/plant/program.hpp>

namespace windage {

class tape {
public:
    enum class outputs { as_written, scaled };

    /// With `outputs::scaled` every output is multiplied by the signal bound with `bind_scale` (a step size).
    tape(const program& source, signal_arena& arena, outputs mode);

    /// Binds input `index` of the program to a signal. Inputs that are numbers bind themselves in `begin`.
    void bind_input(std::size_t index, constant_signal values) { bind(input_slot_[index], values); }
    /// Binds output `index` to the signal that `run` writes.
    void bind_output(std::size_t index, signal values) { slots_[output_slot_[index]] = values; }
    void bind_scale(constant_signal values) { bind(scale_slot_, values); }

    /// Fills the numbers and runs the prologue.
    void begin(const trial_block& block);
    /// Computes all outputs from the bound inputs; outputs must not overlap inputs.
    void run() const { execute(body_); }

private:
    friend class tape_builder;
    using kernel = void (*)(signal to, constant_signal a, constant_signal b, constant_signal c, std::size_t size);
    struct step {
        kernel run;
        int to, a, b, c;  // slots; -1 where the operation has fewer operands
    };

    void bind(int slot, constant_signal values) { slots_[slot] = const_cast<signal>(values); }  // inputs are only read
    void execute(const std::vector<step>& steps) const;
    static kernel kernel_of(operation op);

    std::size_t size_;
    std::vector<signal> slots_;
    std::vector<int> input_slot_, output_slot_;
    int scale_slot_ = -1;
    std::vector<step> prologue_, body_;
    std::vector<std::pair<int, double>> constants_;  // slot, value
    std::vector<std::pair<int, number>> numbers_;    // slot, number
};

} // namespace windage
