#include "tape_builder.hpp"

#include <algorithm>
#include <map>
#include <utility>

namespace windage {

void tape_builder::build(bool scaled) {
    find_levels();
    replace_divisions();
    if (scaled) scale_outputs();
    count_uses();
    join_products();
    join_pairs();
    place_leaves();
    find_last_uses();
    emit(block_level, tape_.prologue_);
    emit(step_level, tape_.once_a_step_);
    emit(stage_level, tape_.body_);
    emit_outputs();
}

template <class F> void tape_builder::for_operands(const instruction& in, F&& f) {
    const int operands[3] = {in.a, in.b, in.c};
    for (int k = 0; k < operand_count(in.op); ++k) f(operands[k]);
}

// The values that the step of a value reads: of two joined operations those of the first, then the others of the
// second.
template <class F> void tape_builder::for_read_values(int value, F&& f) const {
    if (inner_[value] >= 0) for_operands(code_[inner_[value]], f);
    int place = 0;
    for_operands(code_[value], [&](int v) {
        if (inner_[value] < 0 || place != place_[value]) f(v);
        ++place;
    });
}

tape_builder::level tape_builder::level_of(const instruction& in) const {
    if (in.op == operation::load) {
        if (inputs_[in.a].kind == source_kind::value) return block_level;
        return held_[in.a] ? step_level : stage_level;
    }
    level highest = block_level;
    for_operands(in, [&](int v) { highest = std::max(highest, level_[v]); });
    return highest;
}

void tape_builder::find_levels() {
    held_.resize(inputs_.size(), false);
    for (const instruction& in : code_) level_.push_back(level_of(in));
}

int tape_builder::append(const instruction& in) {
    level_.push_back(level_of(in));
    code_.push_back(in);
    return int(code_.size()) - 1;
}

// Dividing costs some sixteen times a multiplication, and the divisor of an equation is mostly a parameter.
void tape_builder::replace_divisions() {
    std::map<int, int> reciprocal_of;
    for (int i = 0; i < written_; ++i) {
        const int divisor = code_[i].b;
        if (code_[i].op != operation::div || level_[i] == level_[divisor]) continue;
        auto found = reciprocal_of.find(divisor);
        if (found == reciprocal_of.end())
            found = reciprocal_of.emplace(divisor, append({operation::reciprocal, divisor})).first;
        code_[i].op = operation::mul;
        code_[i].b = found->second;
    }
}

// The step length joins a factor that is known before the stages where there is one: x * c * h is x * (c h).
void tape_builder::scale_outputs() {
    program_input step;
    step.kind = source_kind::time; // any kind that is bound from outside
    inputs_.push_back(step);
    held_.push_back(true);
    const int h = append({operation::load, int(inputs_.size()) - 1});
    for (int& v : outputs_) {
        const instruction in = code_[v];
        const bool is_product = in.op == operation::mul && level_[v] == stage_level;
        if (is_product && level_[in.b] < stage_level)
            v = append({operation::mul, in.a, append({operation::mul, in.b, h})});
        else if (is_product && level_[in.a] < stage_level)
            v = append({operation::mul, in.b, append({operation::mul, in.a, h})});
        else
            v = append({operation::mul, v, h});
    }
}

// Counts uses from the outputs backwards, so that what nothing needs has no uses and is left out.
void tape_builder::count_uses() {
    uses_.assign(code_.size(), 0);
    std::vector<int> pending = outputs_;
    while (!pending.empty()) {
        const int v = pending.back();
        pending.pop_back();
        if (uses_[v]++ == 0) for_operands(code_[v], [&](int operand) { pending.push_back(operand); });
    }
}

bool tape_builder::is_used_once(int v) const { return uses_[v] == 1 && level_[v] == stage_level; }
bool tape_builder::is_product_used_once(int v) const { return code_[v].op == operation::mul && is_used_once(v); }

// a*b + c in one step saves a store and a load; the product is still rounded before the sum.
void tape_builder::join_products() {
    for (std::size_t i = 0; i < code_.size(); ++i) {
        instruction& in = code_[i];
        if (uses_[i] == 0 || level_[i] != stage_level) continue;
        const bool is_sum = in.op == operation::add, is_difference = in.op == operation::sub;
        if ((!is_sum && !is_difference) || in.a == in.b) continue;
        const bool left = is_product_used_once(in.a);
        if (!left && !is_product_used_once(in.b)) continue;
        const int product = left ? in.a : in.b, other = left ? in.b : in.a;
        uses_[product] = 0;
        const operation joined = is_sum ? operation::mul_add : left ? operation::mul_sub : operation::sub_mul;
        in = {joined, code_[product].a, code_[product].b, other};
    }
}

// Two operations in one loop save a store, a load and a call. Sums and products commute: the joined operand comes
// first.
void tape_builder::join_pairs() {
    inner_.assign(code_.size(), -1);
    place_.assign(code_.size(), 0);
    for (int i = 0; i < int(code_.size()); ++i) {
        if (uses_[i] == 0 || level_[i] != stage_level || is_leaf(i)) continue;
        instruction& in = code_[i];
        const bool is_sum_or_product = in.op == operation::add || in.op == operation::mul;
        const bool commutes = is_sum_or_product || in.op == operation::mul_add || in.op == operation::mul_sub ||
                              in.op == operation::sub_mul;
        for (int place = 0; place < operand_count(in.op); ++place) {
            if (place == 1 && commutes) std::swap(in.a, in.b);
            if (join_operand(i, place == 1 && commutes ? 0 : place)) break;
        }
    }
}

bool tape_builder::join_operand(int value, int place) {
    const instruction& in = code_[value];
    const int operand = place == 0 ? in.a : place == 1 ? in.b : in.c;
    if (!is_used_once(operand) || inner_[operand] >= 0) return false;
    if (!tape::kernel_of(code_[operand].op, in.op, place)) return false;
    inner_[value] = operand;
    place_[value] = place;
    uses_[operand] = 0;
    return true;
}

int tape_builder::new_slot(signal memory) {
    tape_.slots_.push_back(memory);
    return int(tape_.slots_.size()) - 1;
}

bool tape_builder::is_leaf(int v) const { return code_[v].op == operation::load || code_[v].op == operation::constant; }

void tape_builder::place_leaves() {
    slot_.assign(code_.size(), -1);
    for (const program_input& input : inputs_) {
        const bool is_number = input.kind == source_kind::value;
        const int s = new_slot(is_number ? arena_.take() : nullptr);
        if (is_number) tape_.numbers_.emplace_back(s, input.value);
        tape_.input_slot_.push_back(s);
    }
    for (std::size_t i = 0; i < code_.size(); ++i) {
        if (uses_[i] == 0) continue;
        if (code_[i].op == operation::load) slot_[i] = tape_.input_slot_[code_[i].a];
        if (code_[i].op == operation::constant) {
            slot_[i] = new_slot(arena_.take());
            tape_.constants_.emplace_back(slot_[i], code_[i].constant);
        }
    }
}

// Only values of the stages share memory: the others are read by every stage.
void tape_builder::find_last_uses() {
    last_use_.assign(code_.size(), -1);
    for (int i = 0; i < int(code_.size()); ++i)
        if (uses_[i] > 0 && level_[i] == stage_level) for_read_values(i, [&](int v) { last_use_[v] = i; });
    for (int v : outputs_) last_use_[v] = int(code_.size());
}

void tape_builder::release_after_last_use(int v, int position) {
    if (level_[v] != stage_level || is_leaf(v) || last_use_[v] != position) return;
    free_.push_back(slot_[v]);
    last_use_[v] = -1; // a value read twice by one instruction is released once
}

// An output that nothing else reads goes straight to its signal.
int tape_builder::slot_for(int v) {
    if (level_[v] == stage_level && uses_[v] == 1 && last_use_[v] == int(code_.size())) return new_slot(nullptr);
    if (level_[v] != stage_level || free_.empty()) return new_slot(arena_.take());
    const int s = free_.back();
    free_.pop_back();
    return s;
}

tape::step tape_builder::make_step(int value) const {
    const operation op = code_[value].op;
    const int inner = inner_[value];
    tape::step made{inner < 0 ? tape::kernel_of(op) : tape::kernel_of(code_[inner].op, op, place_[value]), {}};
    std::size_t next = 0;
    made.at[next++] = slot_[value];
    for_read_values(value, [&](int v) { made.at[next++] = slot_[v]; });
    return made;
}

// Operands come before the values that read them: `append` adds reciprocals and scaled factors at the end, and what
// reads those belongs to a higher level or comes later still.
void tape_builder::emit(level which, std::vector<tape::step>& steps) {
    for (int i = 0; i < int(code_.size()); ++i) {
        if (uses_[i] == 0 || level_[i] != which || is_leaf(i)) continue;
        // Operands are released first: a step reads a pack before it writes it, so it may write over its operand.
        for_read_values(i, [&](int v) { release_after_last_use(v, i); });
        slot_[i] = slot_for(i);
        steps.push_back(make_step(i));
    }
}

void tape_builder::emit_outputs() {
    for (int v : outputs_) {
        const bool is_direct = tape_.slots_[slot_[v]] == nullptr && !is_leaf(v);
        tape_.output_slot_.push_back(is_direct ? slot_[v] : new_slot(nullptr));
        if (!is_direct)
            tape_.body_.push_back({tape::kernel_of(operation::load), {tape_.output_slot_.back(), slot_[v]}});
    }
}

} // namespace windage
