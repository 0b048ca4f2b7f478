// The kernels of the tape: one loop over the packs of a block for each operation.
#include <stdexcept>

#include <windage/lanes/elementary.hpp>
#include <windage/plant/tape.hpp>

namespace windage {
namespace {

template <operation Op> WINDAGE_INLINE wide apply(wide a, wide b, wide c) {
    if constexpr (Op == operation::load) return a;
    if constexpr (Op == operation::add) return a + b;
    if constexpr (Op == operation::sub) return a - b;
    if constexpr (Op == operation::mul) return a * b;
    if constexpr (Op == operation::div) return a / b;
    if constexpr (Op == operation::reciprocal) return wide(1.0) / a;
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

template <operation Op, int Operands>
void over_block(signal to, constant_signal a, constant_signal b, constant_signal c, std::size_t size) {
    for_each_pack(size, [&](std::size_t i) WINDAGE_LANE_LOOP {
        const wide x = wide::load(a + i);
        const wide y = Operands > 1 ? wide::load(b + i) : x;
        const wide z = Operands > 2 ? wide::load(c + i) : x;
        apply<Op>(x, y, z).store(to + i);
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

} // namespace windage
