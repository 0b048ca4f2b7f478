// A number of a description: either the same in every trial or the column of a drawn parameter.
// This is how "any number may be uncertain" reaches the engine: every place that takes a number takes one of these.
#pragma once

namespace windage {

struct number {
    double value = 0.0; ///< used when `parameter` is negative
    int parameter = -1; ///< column of the drawn parameter, or -1 for a constant

    constexpr number() = default;
    constexpr number(double constant) : value(constant) {}
    static constexpr number drawn(int column) {
        number n;
        n.parameter = column;
        return n;
    }
    constexpr bool is_constant() const { return parameter < 0; }
    constexpr bool is_constant(double x) const { return is_constant() && value == x; }
};

} // namespace windage
