// The kernels of the tape: one loop over the packs of a block for each operation, or for two of them joined.
#include <stdexcept>

#include <windage/lanes/elementary.hpp>
#include <windage/plant/tape.hpp>

namespace windage {
namespace {

template <operation Op, class Pack> WINDAGE_INLINE Pack apply(Pack a, Pack b, Pack c) {
    if constexpr (Op == operation::load) return a;
    if constexpr (Op == operation::add) return a + b;
    if constexpr (Op == operation::sub) return a - b;
    if constexpr (Op == operation::mul) return a * b;
    if constexpr (Op == operation::div) return a / b;
    if constexpr (Op == operation::reciprocal) return Pack(1.0) / a;
    if constexpr (Op == operation::neg) return -a;
    if constexpr (Op == operation::mul_add) return a * b + c;
    if constexpr (Op == operation::mul_sub) return a * b - c;
    if constexpr (Op == operation::sub_mul) return c - a * b;
    if constexpr (Op == operation::sqrt) return square_root(a);
    if constexpr (Op == operation::sin) return sine(a);
    if constexpr (Op == operation::cos) return cosine(a);
    if constexpr (Op == operation::tan) return tangent(a);
    if constexpr (Op == operation::asin) return arc_sine(a);
    if constexpr (Op == operation::acos) return arc_cosine(a);
    if constexpr (Op == operation::atan) return arc_tangent(a);
    if constexpr (Op == operation::atan2) return arc_tangent2(a, b);
    if constexpr (Op == operation::exp) return exponential(a);
    if constexpr (Op == operation::log) return logarithm(a);
    if constexpr (Op == operation::pow) return power(a, b);
    if constexpr (Op == operation::tanh) return hyperbolic_tangent(a);
    if constexpr (Op == operation::sinh) return hyperbolic_sine(a);
    if constexpr (Op == operation::cosh) return hyperbolic_cosine(a);
    if constexpr (Op == operation::abs) return absolute(a);
    if constexpr (Op == operation::sign) return sign(a);
    if constexpr (Op == operation::floor) return floor(a);
    if constexpr (Op == operation::round) return nearest_integer(a);
    if constexpr (Op == operation::mod) return floored_remainder(a, b);
    if constexpr (Op == operation::min) return minimum(a, b);
    if constexpr (Op == operation::max) return maximum(a, b);
    if constexpr (Op == operation::less) return as_number(a < b);
    if constexpr (Op == operation::less_equal) return as_number(a <= b);
    if constexpr (Op == operation::equal) return as_number(a == b);
    if constexpr (Op == operation::not_equal) return as_number(a != b);
    if constexpr (Op == operation::logical_and) return as_number((a != 0.0) & (b != 0.0));
    if constexpr (Op == operation::logical_or) return as_number((a != 0.0) | (b != 0.0));
    if constexpr (Op == operation::logical_not) return as_number(a == 0.0);
    if constexpr (Op == operation::select) return select(a != 0.0, b, c);
}

// Functions wait for themselves: their chain of operations is longer than what the processor looks ahead. Two packs
// side by side fill the gaps (measured: a tenth faster); plain arithmetic waits for memory and gains nothing.
constexpr bool is_function(operation op) {
    switch (op) {
    case operation::sin:
    case operation::cos:
    case operation::exp:
    case operation::log:
    case operation::tanh:
    case operation::atan: return true;
    default: return false;
    }
}

/// Calls f(i, pack) for the offset of each pack of a block, two packs at once where `Two`; the second argument only
/// tells the width.
template <bool Two, class F> WINDAGE_INLINE void for_each_wide_pack(std::size_t size, F&& f) {
    std::size_t i = 0;
    if constexpr (Two)
        for (; i + 2 * lanes <= size; i += 2 * lanes) f(i, pack<2 * lanes>());
    for (; i < size; i += lanes) f(i, wide());
}

template <operation Op, int Operands> void over_block(const signal* slots, const int* at, std::size_t size) {
    const signal to = slots[at[0]];
    const constant_signal a = slots[at[1]], b = slots[at[Operands > 1 ? 2 : 1]], c = slots[at[Operands > 2 ? 3 : 1]];
    for_each_wide_pack<is_function(Op)>(size, [&]<class Pack>(std::size_t i, Pack) WINDAGE_LANE_LOOP {
        const Pack x = Pack::load(a + i);
        const Pack y = Operands > 1 ? Pack::load(b + i) : x;
        const Pack z = Operands > 2 ? Pack::load(c + i) : x;
        apply<Op>(x, y, z).store(to + i);
    });
}

constexpr int arithmetic_operands(operation op) {
    if (op == operation::add || op == operation::sub || op == operation::mul) return 2;
    return op == operation::mul_add || op == operation::mul_sub || op == operation::sub_mul ? 3 : 1;
}

// Two operations in one loop: the result of the first never leaves the registers.
template <operation First, operation Then, int Place>
void pair_over_block(const signal* slots, const int* at, std::size_t size) {
    constexpr int first_operands = arithmetic_operands(First), operands = arithmetic_operands(Then);
    const signal to = slots[at[0]];
    constant_signal of_first[3] = {}, of_then[3] = {};
    for (int k = 0; k < first_operands; ++k) of_first[k] = slots[at[1 + k]];
    for (int k = 0, next = 1 + first_operands; k < operands; ++k)
        if (k != Place) of_then[k] = slots[at[next++]];
    for_each_wide_pack<is_function(Then)>(size, [&]<class Pack>(std::size_t i, Pack) WINDAGE_LANE_LOOP {
        Pack x[3], y[3];
        for (int k = 0; k < 3; ++k) x[k] = Pack::load(of_first[k < first_operands ? k : 0] + i);
        const Pack joined = apply<First>(x[0], x[1], x[2]);
        for (int k = 0; k < 3; ++k) y[k] = k < operands && k != Place ? Pack::load(of_then[k] + i) : joined;
        apply<Then>(y[0], y[1], y[2]).store(to + i);
    });
}

} // namespace

tape::kernel tape::kernel_of(operation op) {
    switch (op) {
#define WINDAGE_KERNEL(NAME, OPERANDS)                                                                                 \
    case operation::NAME: return over_block<operation::NAME, OPERANDS>
        WINDAGE_KERNEL(load, 1);
        WINDAGE_KERNEL(add, 2);
        WINDAGE_KERNEL(sub, 2);
        WINDAGE_KERNEL(mul, 2);
        WINDAGE_KERNEL(div, 2);
        WINDAGE_KERNEL(reciprocal, 1);
        WINDAGE_KERNEL(neg, 1);
        WINDAGE_KERNEL(mul_add, 3);
        WINDAGE_KERNEL(mul_sub, 3);
        WINDAGE_KERNEL(sub_mul, 3);
        WINDAGE_KERNEL(sqrt, 1);
        WINDAGE_KERNEL(sin, 1);
        WINDAGE_KERNEL(cos, 1);
        WINDAGE_KERNEL(tan, 1);
        WINDAGE_KERNEL(asin, 1);
        WINDAGE_KERNEL(acos, 1);
        WINDAGE_KERNEL(atan, 1);
        WINDAGE_KERNEL(atan2, 2);
        WINDAGE_KERNEL(exp, 1);
        WINDAGE_KERNEL(log, 1);
        WINDAGE_KERNEL(pow, 2);
        WINDAGE_KERNEL(tanh, 1);
        WINDAGE_KERNEL(sinh, 1);
        WINDAGE_KERNEL(cosh, 1);
        WINDAGE_KERNEL(abs, 1);
        WINDAGE_KERNEL(sign, 1);
        WINDAGE_KERNEL(floor, 1);
        WINDAGE_KERNEL(round, 1);
        WINDAGE_KERNEL(mod, 2);
        WINDAGE_KERNEL(min, 2);
        WINDAGE_KERNEL(max, 2);
        WINDAGE_KERNEL(less, 2);
        WINDAGE_KERNEL(less_equal, 2);
        WINDAGE_KERNEL(equal, 2);
        WINDAGE_KERNEL(not_equal, 2);
        WINDAGE_KERNEL(logical_and, 2);
        WINDAGE_KERNEL(logical_or, 2);
        WINDAGE_KERNEL(logical_not, 1);
        WINDAGE_KERNEL(select, 3);
#undef WINDAGE_KERNEL
    case operation::constant: break;
    }
    throw std::logic_error("tape: a constant is placed, not computed");
}

namespace {

using pair_kernel = void (*)(const signal*, const int*, std::size_t);

template <operation First> pair_kernel pair_of(operation then, int place) {
    if constexpr (First == operation::mul) {
        if (then == operation::tanh) return pair_over_block<First, operation::tanh, 0>;
        if (then == operation::exp) return pair_over_block<First, operation::exp, 0>;
        if (then == operation::sin) return pair_over_block<First, operation::sin, 0>;
        if (then == operation::cos) return pair_over_block<First, operation::cos, 0>;
    }
#define WINDAGE_PAIR(THEN, PLACE)                                                                                      \
    if (then == operation::THEN && place == PLACE) return pair_over_block<First, operation::THEN, PLACE>
    WINDAGE_PAIR(add, 0);
    WINDAGE_PAIR(sub, 0);
    WINDAGE_PAIR(sub, 1);
    WINDAGE_PAIR(mul, 0);
    WINDAGE_PAIR(mul_add, 0);
    WINDAGE_PAIR(mul_add, 2);
    WINDAGE_PAIR(mul_sub, 0);
    WINDAGE_PAIR(mul_sub, 2);
    WINDAGE_PAIR(sub_mul, 0);
    WINDAGE_PAIR(sub_mul, 2);
#undef WINDAGE_PAIR
    return nullptr;
}

} // namespace

tape::kernel tape::kernel_of(operation first, operation then, int place) {
    switch (first) {
    case operation::add: return pair_of<operation::add>(then, place);
    case operation::sub: return pair_of<operation::sub>(then, place);
    case operation::mul: return pair_of<operation::mul>(then, place);
    case operation::mul_add: return pair_of<operation::mul_add>(then, place);
    case operation::mul_sub: return pair_of<operation::mul_sub>(then, place);
    case operation::sub_mul: return pair_of<operation::sub_mul>(then, place);
    default: return nullptr;
    }
}

} // namespace windage
