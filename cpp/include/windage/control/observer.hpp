// One step of the extended state observer of the plant y^(n) = f + b0 u, on packs.
// States: estimates of y, y', ..., y^(n-1) and of the total disturbance f, taken as constant between samples.
#pragma once

#include <windage/lanes/pack.hpp>

namespace windage {

/// Prediction with a zero-order hold: the Taylor series of the integrator chain, exact for constant f and u.
/// `top` is the highest derivative f + b0 u, `weight` holds Ts^m / m! for m = 0 .. n. The terms are independent
/// products, since a chain of dependent operations is what this step waits for (measured).
template <int Order> WINDAGE_INLINE void predict_zero_order_hold(wide* x, wide top, const wide* weight) {
    for (int i = 0; i < Order; ++i) {
        wide sum = weight[Order - i] * top;
        for (int m = Order - i - 1; m >= 1; --m) sum = weight[m] * x[i + m] + sum;
        x[i] = x[i] + sum;
    }
}

/// Prediction by one explicit Euler step.
template <int Order> WINDAGE_INLINE void predict_euler(wide* x, wide top, wide sample_period) {
    for (int i = 0; i < Order; ++i) x[i] = x[i] + sample_period * (i + 1 < Order ? x[i + 1] : top);
}

/// Correction of the prediction by the current measurement (current observer).
template <int Order> WINDAGE_INLINE void correct(wide* x, wide measured, const wide* gains) {
    const wide innovation = measured - x[0];
    for (int i = 0; i <= Order; ++i) x[i] = x[i] + gains[i] * innovation;
}

} // namespace windage
