// Turns a program into the steps of a tape (see tape.hpp for what is done and why it keeps the digits).
#pragma once

#include <map>
#include <vector>

#include <windage/plant/tape.hpp>

namespace windage {

class tape_builder {
public:
    tape_builder(const program& source, signal_arena& arena, tape& target)
        : code_(source.code), outputs_(source.outputs), inputs_(source.inputs), arena_(arena), tape_(target) {}

    void build(bool scaled);

private:
    void mark_invariants();
    void replace_divisions();
    void count_uses();
    void join_products();
    void place_leaves();
    void emit_prologue();
    void emit_body();
    void emit_outputs(bool scaled);

    bool is_product_used_once(int value) const;
    int new_slot(signal memory);
    int take_temporary();
    void release_after_last_use(int value, int position);
    tape::step make_step(const instruction& in, int to) const;
    template <class F> void for_operands(const instruction& in, F&& f) const;

    std::vector<instruction> code_;
    std::vector<int> outputs_;
    const std::vector<program_input>& inputs_;
    signal_arena& arena_;
    tape& tape_;

    std::vector<bool> invariant_;
    std::vector<int> uses_;       // of a value by reachable instructions and outputs
    std::vector<int> last_use_;   // position of the last body instruction that reads it
    std::vector<int> slot_;       // of each value, -1 while it has none
    std::vector<int> free_;       // temporaries whose value is no longer needed
    std::vector<int> appended_;   // reciprocals made by replace_divisions, in order
};

} // namespace windage
