// What a plant is, in numbers: filled by the language bindings or by C++ users, read by the engine.
#pragma once

#include <string>
#include <vector>

#include <windage/plant/program.hpp>

namespace windage {

enum class plant_kind {
    equations,         ///< x' = f(t, x, u, w; p) as a program
    integrator_chain,  ///< y^(n) = b u + w;            numbers: b
    first_order,       ///< K / (T s + 1);              numbers: K, T
    second_order,      ///< K / (T^2 s^2 + 2 D T s + 1); numbers: K, T, D
    transfer_function, ///< numbers: numerator, then denominator, both in descending powers of s
    state_space,       ///< numbers: A (row by row), B, E (row by row, one column a disturbance), C
    dc_drive,          ///< see plant/dc_drive.hpp
    two_mass_drive,    ///< see plant/two_mass_drive.hpp
};

/// How the differential equations are integrated between two samples, at fixed steps.
/// Linear plants are sampled exactly by the matrix exponential and need none of these, but for the reference
/// (plant/linear_ode.hpp).
enum class integrator_kind {
    euler,      ///< explicit Euler, order 1
    rk4,        ///< the classical Runge-Kutta method, order 4
    cash_karp5, ///< Cash & Karp (1990), order 5
    reference,  ///< Cash & Karp with step control to a tight tolerance; audits the others on single trials
};

struct plant_description {
    plant_kind kind = plant_kind::integrator_chain;
    std::vector<std::string> states;   ///< names
    std::vector<number> initial_state; ///< one a state
    std::vector<number> numbers;       ///< stock plants: see plant_kind
    int order = 1;                     ///< integrator chain: n; transfer function: coefficients of the numerator
    int output_state = 0;              ///< drives: the state that is the output
    int disturbances = 0;              ///< inputs w
    number dead_time;                  ///< at the plant's input, s
    program derivatives;               ///< equations: one output a state
    program output;                    ///< equations: y
};

} // namespace windage
