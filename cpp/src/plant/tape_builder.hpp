// Turns a program into the steps of a tape (see tape.hpp for what is done and why the digits do not depend on the
// block).
#pragma once

#include <vector>

#include <windage/plant/tape.hpp>

namespace windage {

class tape_builder {
public:
    tape_builder(const program& source, const std::vector<bool>& held, signal_arena& arena, tape& target)
        : code_(source.code), outputs_(source.outputs), inputs_(source.inputs), held_(held), arena_(arena),
          tape_(target), written_(int(source.code.size())) {}

    void build(bool scaled);

private:
    /// How often a value changes: once a block, once an integration step, or at every evaluation.
    enum level { block_level, step_level, stage_level };

    void find_levels();
    void replace_divisions();
    void scale_outputs();
    void count_uses();
    void join_products();
    void join_pairs();
    void place_leaves();
    void emit(level which, std::vector<tape::step>& steps);
    void emit_outputs();

    level level_of(const instruction& in) const;
    int append(const instruction& in);
    bool is_leaf(int value) const;
    bool is_used_once(int value) const;
    bool is_product_used_once(int value) const;
    bool join_operand(int value, int place);
    int new_slot(signal memory);
    int slot_for(int value);
    void find_last_uses();
    void release_after_last_use(int value, int position);
    tape::step make_step(int value) const;
    template <class F> static void for_operands(const instruction& in, F&& f);
    template <class F> void for_read_values(int value, F&& f) const;

    std::vector<instruction> code_;
    std::vector<int> outputs_;
    std::vector<program_input> inputs_;
    std::vector<bool> held_; // which inputs keep their value during a step
    signal_arena& arena_;
    tape& tape_;
    int written_; // values of the program; later ones are the builder's own

    std::vector<level> level_;
    std::vector<int> inner_;    // the value that is computed together with this one, -1: none
    std::vector<int> place_;    // which operand that is
    std::vector<int> uses_;     // of a value by reachable instructions and outputs
    std::vector<int> last_use_; // position of the last instruction of its level that reads it
    std::vector<int> slot_;     // of each value, -1 while it has none
    std::vector<int> free_;     // temporaries whose value is no longer needed
};

} // namespace windage
