// What acts on a linear plant between two samples, as a linear system of its own: the held command and, of each
// disturbance, its value and the derivatives with which it moves (v' = S v; Davison 1976, "The robust control of a
// servomechanism problem for linear time-invariant multivariable systems", IEEE TAC 21(1) 25-34, from memory). The
// matrix exponential of both together is exact for polynomials and sines; at its breaks a disturbance jumps from one
// such motion to another, and the jump acts from there on.
#pragma once

#include <vector>

#include <windage/plant/matrix_exponential.hpp>
#include <windage/plant/plant.hpp>

namespace windage {

class exosystem {
public:
    exosystem(const plant_disturbances& w, signal_arena& arena);

    /// Columns of Gamma: the command, then those of each disturbance that acts at all.
    int columns() const { return columns_; }
    /// S is the same in every lane.
    bool is_same() const;
    /// The motion of a plant over h, for what acts as it is at the start; `period` sets the units on the way.
    step_matrices step(const linear_model& m, wide h, wide period, std::size_t i) const;

    /// The columns of the command and of the values alone.
    lane_matrix held(const lane_matrix& gamma) const;

    struct input {
        int column;
        constant_signal value;
    };
    /// Disturbances and the derivatives that are not zero in every lane at the start of a sample interval.
    const std::vector<input>& at_start(constant_signal time);
    /// By how much they jump at times of each lane's own.
    const std::vector<input>& jumps_at(constant_signal time);

private:
    struct part {
        int which, term, column;
        smooth_motion motion;
        std::vector<signal> start, before, after; // value and derivatives
    };
    struct units {
        wide rate, closing;
    };
    units units_of(const part& p, wide period, std::size_t i) const;

    const plant_disturbances& w_;
    std::size_t size_;
    int columns_ = 1;
    bool all_held_ = true;
    std::vector<part> parts_;
    std::vector<input> inputs_;
};

} // namespace windage
