#include <windage/plant/linear_model.hpp>

#include <stdexcept>
#include <string>

#include <windage/lanes/double_double.hpp>

namespace windage {
namespace {

linear_model zeros(int states, int disturbances) {
    return {lane_matrix(states, states), lane_matrix(states, 1), lane_matrix(states, disturbances),
            lane_matrix(1, states), lane_matrix()};
}

// y^(n) = b u + w
linear_model integrator_chain(int order, wide gain) {
    linear_model m = zeros(order, 1);
    for (int i = 0; i + 1 < order; ++i) m.a(i, i + 1) = 1.0;
    m.b(order - 1, 0) = gain;
    m.e(order - 1, 0) = 1.0;
    m.c(0, 0) = 1.0;
    return m;
}

// K / (T s + 1), with the disturbance added to the input
linear_model first_order(wide gain, wide time_constant) {
    linear_model m = zeros(1, 1);
    m.a(0, 0) = -1.0 / time_constant;
    m.b(0, 0) = m.e(0, 0) = gain / time_constant;
    m.c(0, 0) = 1.0;
    return m;
}

// K / (T^2 s^2 + 2 D T s + 1), with the disturbance added to the input
linear_model second_order(wide gain, wide time_constant, wide damping) {
    linear_model m = zeros(2, 1);
    const wide square = time_constant * time_constant;
    m.a(0, 1) = 1.0;
    m.a(1, 0) = -1.0 / square;
    m.a(1, 1) = -2.0 * damping / time_constant;
    m.b(1, 0) = m.e(1, 0) = gain / square;
    m.c(0, 0) = 1.0;
    return m;
}

// Controllable canonical form, with the disturbance added to the input
linear_model transfer_function(const std::vector<wide>& numbers, int numerator_terms) {
    const int n = int(numbers.size()) - numerator_terms - 1;
    const wide lead = numbers[numerator_terms];
    linear_model m = zeros(n, 1);
    for (int i = 0; i + 1 < n; ++i) m.a(i, i + 1) = 1.0;
    m.a_low = lane_matrix(n, n); // close modes feel the rounding of a coefficient a million times
    for (int i = 0; i < n; ++i) {
        const wide_pair coefficient = wide_pair(-numbers[numbers.size() - 1 - std::size_t(i)]) / wide_pair(lead);
        m.a(n - 1, i) = coefficient.high;
        m.a_low(n - 1, i) = coefficient.low;
    }
    m.b(n - 1, 0) = m.e(n - 1, 0) = 1.0;
    for (int i = 0; i < numerator_terms; ++i) m.c(0, i) = numbers[numerator_terms - 1 - i] / lead;
    return m;
}

linear_model state_space(const std::vector<wide>& numbers, int n, int disturbances) {
    linear_model m = zeros(n, disturbances);
    const wide* next = numbers.data();
    for (int i = 0; i < n; ++i)
        for (int j = 0; j < n; ++j) m.a(i, j) = *next++;
    for (int i = 0; i < n; ++i) m.b(i, 0) = *next++;
    for (int i = 0; i < n; ++i)
        for (int j = 0; j < disturbances; ++j) m.e(i, j) = *next++;
    for (int i = 0; i < n; ++i) m.c(0, i) = *next++;
    return m;
}

void expect_numbers(const plant_description& d, std::size_t numbers, std::size_t states) {
    if (d.numbers.size() != numbers || d.states.size() != states)
        throw std::invalid_argument("plant: " + std::to_string(d.numbers.size()) + " numbers and " +
                                    std::to_string(d.states.size()) + " states; expected " + std::to_string(numbers) +
                                    " and " + std::to_string(states));
}

} // namespace

void check_linear(const plant_description& d) {
    const std::size_t n = d.states.size(), order = std::size_t(d.order > 0 ? d.order : 0);
    switch (d.kind) {
    case plant_kind::integrator_chain: return expect_numbers(d, 1, order);
    case plant_kind::first_order: return expect_numbers(d, 2, 1);
    case plant_kind::second_order: return expect_numbers(d, 3, 2);
    case plant_kind::transfer_function:
        expect_numbers(d, order + n + 1, n);
        if (order < 1 || order > n) throw std::invalid_argument("plant: the transfer function must be strictly proper");
        return;
    case plant_kind::state_space: return expect_numbers(d, n * (n + 2 + std::size_t(d.disturbances)), n);
    default: throw std::invalid_argument("plant: not a linear stock plant");
    }
}

void check_linear_disturbances(const plant_description& d, int disturbances) {
    if (disturbances <= (d.kind == plant_kind::state_space ? d.disturbances : 1)) return;
    throw std::invalid_argument(d.kind == plant_kind::state_space
                                    ? "plant: more disturbances than columns of E"
                                    : "plant: this stock plant has one disturbance; use a state-space plant for more");
}

linear_model realise(const plant_description& d, const std::vector<wide>& numbers) {
    switch (d.kind) {
    case plant_kind::integrator_chain: return integrator_chain(d.order, numbers[0]);
    case plant_kind::first_order: return first_order(numbers[0], numbers[1]);
    case plant_kind::second_order: return second_order(numbers[0], numbers[1], numbers[2]);
    case plant_kind::transfer_function: return transfer_function(numbers, d.order);
    default: return state_space(numbers, int(d.states.size()), d.disturbances);
    }
}

linear_model with_lag(const linear_model& m, wide time_constant) {
    const int n = m.a.rows(), w = m.e.columns();
    linear_model out = zeros(n + 1, w);
    for (int i = 0; i < n; ++i) {
        for (int j = 0; j < n; ++j) out.a(i, j) = m.a(i, j);
        for (int k = 0; k < w; ++k) out.e(i, k) = m.e(i, k);
        out.a(i, n) = m.b(i, 0);
        out.c(0, i) = m.c(0, i);
    }
    if (m.a_low.rows() > 0) {
        out.a_low = lane_matrix(n + 1, n + 1);
        for (int i = 0; i < n; ++i)
            for (int j = 0; j < n; ++j) out.a_low(i, j) = m.a_low(i, j);
    }
    out.a(n, n) = -1.0 / time_constant;
    out.b(n, 0) = 1.0 / time_constant;
    return out;
}

} // namespace windage
