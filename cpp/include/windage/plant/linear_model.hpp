// State-space models of the linear stock plants, one plant a lane: x' = A x + B u + E w, y = C x.
#pragma once

#include <memory>
#include <vector>

#include <boost/container/small_vector.hpp>

#include <windage/lanes/pack.hpp>
#include <windage/plant/description.hpp>

namespace windage {

/// A small matrix of packs, or of pairs of packs: one matrix a lane.
template <class Number> class matrix_of {
public:
    matrix_of() = default;
    matrix_of(int rows, int columns) : columns_(columns), values_(std::size_t(rows * columns), Number(0.0)) {}
    Number& operator()(int row, int column) { return values_[std::size_t(row * columns_ + column)]; }
    const Number& operator()(int row, int column) const { return values_[std::size_t(row * columns_ + column)]; }
    int rows() const { return columns_ > 0 ? int(values_.size()) / columns_ : 0; }
    int columns() const { return columns_; }

private:
    int columns_ = 0;
    /// No allocation up to three states; the standard allocator aligns packs, that of boost does not.
    boost::container::small_vector<Number, 16, std::allocator<Number>> values_;
};

using lane_matrix = matrix_of<wide>;

struct linear_model {
    lane_matrix a, b, e, c;
    lane_matrix a_low; ///< what rounding has left of A; empty where that does not matter
};

/// Throws std::invalid_argument where the description has the wrong count of numbers or states.
void check_linear(const plant_description& d);
/// The same for a count of disturbances that the plant does not have.
void check_linear_disturbances(const plant_description& d, int disturbances);

/// The model of a linear stock plant that `check_linear` accepts, for the numbers of each lane.
linear_model realise(const plant_description& d, const std::vector<wide>& numbers);

/// The model with the first-order lag of the actuator as one more state: the plant's input is that state, the command
/// drives the lag.
linear_model with_lag(const linear_model& m, wide time_constant);

} // namespace windage
