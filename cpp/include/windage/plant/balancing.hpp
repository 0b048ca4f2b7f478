// Units in which the states of a linear system are of one size: the diagonal similarity by powers of two that Parlett &
// Reinsch 1969 ("Balancing a matrix for calculation of eigenvalues and eigenvectors", Numer. Math. 13(4) 293-304) give.
#pragma once

#include <windage/plant/linear_model.hpp>

namespace windage {

/// The unit of each state, a power of two (a column; one system a lane): with x_i = unit_i z_i, the off-diagonal row
/// and column sums of the matrix of z are within a factor of about two of each other, where nothing is zero.
lane_matrix balanced_units(const lane_matrix& a);

} // namespace windage
