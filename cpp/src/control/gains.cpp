#include <windage/control/gains.hpp>

#include <Eigen/LU>

#include <windage/lanes/elementary.hpp>

namespace windage {
namespace {

// Small enough for the stack; at this size Eigen's factorisation works column by column in a fixed order.
constexpr int max_states = max_order + 1;
using matrix = Eigen::Matrix<double, Eigen::Dynamic, Eigen::Dynamic, Eigen::ColMajor, max_states, max_states>;
using vector = Eigen::Matrix<double, Eigen::Dynamic, 1, Eigen::ColMajor, max_states, 1>;

double binomial(int n, int k) {
    double result = 1.0;
    for (int i = 1; i <= k; ++i) result = result * (n - k + i) / i;
    return result;
}

// State matrix of the integrator chain of n states and its constant disturbance, for a sample period of one.
matrix unit_state_matrix(int states, discretisation_kind kind) {
    matrix a = matrix::Zero(states, states);
    for (int i = 0; i < states; ++i) {
        double entry = 1.0;
        for (int j = i; j < states; ++j) {
            const bool present = kind == discretisation_kind::zero_order_hold || j <= i + 1;
            a(i, j) = present ? entry : 0.0;
            entry /= j - i + 1;
        }
    }
    return a;
}

// Rows c A, c A^2, ..., c A^n with c = (1, 0, ..., 0): the observability matrix of the current observer.
matrix observability(const matrix& a) {
    matrix rows(a.rows(), a.cols()), power = a;
    for (int i = 0; i < a.rows(); ++i) {
        rows.row(i) = power.row(0);
        power = matrix(power.lazyProduct(a));
    }
    return rows;
}

} // namespace

void controller_gains(int order, wide bandwidth, wide* gains) {
    wide power = 1.0;
    for (int i = order - 1; i >= 0; --i) {
        power = power * bandwidth;
        gains[i] = binomial(order, i) * power;
    }
}

void continuous_observer_gains(int order, wide bandwidth, wide* gains) {
    wide power = 1.0;
    for (int i = 0; i <= order; ++i) {
        power = power * bandwidth;
        gains[i] = binomial(order + 1, i + 1) * power;
    }
}

// Ackermann's formula (Ackermann 1972) for the pair (A, c A): l = (A - z I)^(n+1) O^-1 (0, ..., 0, 1)'. In the states
// x_i Ts^(i-1) the matrix A is made of numbers only, so that the period enters as the scale of each gain alone.
void observer_gains(int order, discretisation_kind kind, wide bandwidth, wide sample_period, wide* gains) {
    const int n = order + 1;
    const matrix a = unit_state_matrix(n, kind);
    const vector start = observability(a).partialPivLu().solve(vector::Unit(n, n - 1));
    const wide decay = -exponential_minus_one(-bandwidth * sample_period); // 1 - z without cancellation
    for (int i = 0; i < n; ++i) gains[i] = start[i];
    for (int power = 0; power < n; ++power)
        for (int i = 0; i < n; ++i) { // (A - z I) = (1 - z) I + strictly upper part: in place, top row first
            wide sum = decay * gains[i];
            for (int j = i + 1; j < n; ++j) sum += a(i, j) * gains[j];
            gains[i] = sum;
        }
    wide scale = 1.0;
    for (int i = 0; i < n; ++i) {
        gains[i] = gains[i] / scale;
        scale = scale * sample_period;
    }
}

} // namespace windage
