#include "tape_builder.hpp"

namespace windage {

void tape_builder::build(bool scaled) {
    mark_invariants();
    replace_divisions();
    count_uses();
    join_products();
    place_leaves();
    emit_prologue();
    emit_body();
    emit_outputs(scaled);
}

template <class F> void tape_builder::for_operands(const instruction& in, F&& f) const {
    const int operands[3] = {in.a, in.b, in.c};
    for (int k = 0; k < operand_count(in.op); ++k) f(operands[k]);
}

void tape_builder::mark_invariants() {
    invariant_.assign(code_.size(), false);
    for (std::size_t i = 0; i < code_.size(); ++i) {
        const instruction& in = code_[i];
        bool fixed = true;
        if (in.op == operation::load) fixed = inputs_[in.a].kind == source_kind::value;
        for_operands(in, [&](int v) { fixed = fixed && invariant_[v]; });
        invariant_[i] = fixed;
    }
}

// Dividing costs some sixteen times a multiplication, and the divisor of an equation is mostly a parameter.
void tape_builder::replace_divisions() {
    std::map<int, int> reciprocal_of;
    const std::size_t written = code_.size();
    for (std::size_t i = 0; i < written; ++i) {
        if (code_[i].op != operation::div || invariant_[i] || !invariant_[code_[i].b]) continue;
        auto [found, is_new] = reciprocal_of.try_emplace(code_[i].b, int(code_.size()));
        if (is_new) {
            code_.push_back({operation::reciprocal, code_[i].b});
            invariant_.push_back(true);
        }
        code_[i].op = operation::mul;
        code_[i].b = found->second;
    }
    for (std::size_t i = written; i < code_.size(); ++i) appended_.push_back(int(i));
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

bool tape_builder::is_product_used_once(int v) const {
    return code_[v].op == operation::mul && uses_[v] == 1 && !invariant_[v];
}

// a*b + c in one step saves a store and a load; the product is still rounded before the sum.
void tape_builder::join_products() {
    for (std::size_t i = 0; i < code_.size(); ++i) {
        instruction& in = code_[i];
        if (uses_[i] == 0 || invariant_[i]) continue;
        const bool is_sum = in.op == operation::add, is_difference = in.op == operation::sub;
        if (!is_sum && !is_difference) continue;
        const bool left = is_product_used_once(in.a);
        if (!left && !is_product_used_once(in.b)) continue;
        const int product = left ? in.a : in.b, other = left ? in.b : in.a;
        if (product == other) continue;
        uses_[product] = 0;
        const operation joined = is_sum ? operation::mul_add : left ? operation::mul_sub : operation::sub_mul;
        in = {joined, code_[product].a, code_[product].b, other};
    }
}

int tape_builder::new_slot(signal memory) {
    tape_.slots_.push_back(memory);
    return int(tape_.slots_.size()) - 1;
}

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

tape::step tape_builder::make_step(const instruction& in, int to) const {
    const int n = operand_count(in.op);
    return {tape::kernel_of(in.op), to, n > 0 ? slot_[in.a] : -1, n > 1 ? slot_[in.b] : -1, n > 2 ? slot_[in.c] : -1};
}

void tape_builder::emit_prologue() {
    auto emit = [&](int i) {
        if (uses_[i] == 0 || !invariant_[i] || slot_[i] >= 0) return;
        slot_[i] = new_slot(arena_.take());
        tape_.prologue_.push_back(make_step(code_[i], slot_[i]));
    };
    const int written = int(code_.size() - appended_.size());
    for (int i = 0; i < written; ++i) emit(i);
    for (int i : appended_) emit(i);
}

int tape_builder::take_temporary() {
    if (free_.empty()) return new_slot(arena_.take());
    const int s = free_.back();
    free_.pop_back();
    return s;
}

void tape_builder::release_after_last_use(int v, int position) {
    const bool is_temporary = !invariant_[v] && code_[v].op != operation::load;
    if (is_temporary && last_use_[v] == position) {
        free_.push_back(slot_[v]);
        last_use_[v] = -1;  // a value read twice by one instruction is released once
    }
}

void tape_builder::emit_body() {
    const int written = int(code_.size() - appended_.size());
    last_use_.assign(code_.size(), -1);
    for (int i = 0; i < written; ++i)
        if (uses_[i] > 0 && !invariant_[i]) for_operands(code_[i], [&](int v) { last_use_[v] = i; });
    for (int v : outputs_) last_use_[v] = written;
    for (int i = 0; i < written; ++i) {
        if (uses_[i] == 0 || invariant_[i] || slot_[i] >= 0) continue;
        // Operands are released first: a step reads a pack before it writes it, so it may write over its operand.
        for_operands(code_[i], [&](int v) { release_after_last_use(v, i); });
        slot_[i] = take_temporary();
        tape_.body_.push_back(make_step(code_[i], slot_[i]));
    }
}

void tape_builder::emit_outputs(bool scaled) {
    if (scaled) tape_.scale_slot_ = new_slot(nullptr);
    for (int v : outputs_) {
        const int s = new_slot(nullptr);
        tape_.output_slot_.push_back(s);
        if (scaled)
            tape_.body_.push_back({tape::kernel_of(operation::mul), s, slot_[v], tape_.scale_slot_, -1});
        else
            tape_.body_.push_back({tape::kernel_of(operation::load), s, slot_[v], -1, -1});
    }
}

} // namespace windage
