// The exponential of a small matrix with the same digits on every machine: plain products in their written order
// (Eigen's lazyProduct, built without its vectorisation), + - * / only.
#pragma once

#include <Eigen/Core>

namespace windage {

/// exp(a) by scaling, a Taylor polynomial and squaring (Moler & Van Loan 2003, "Nineteen dubious ways to compute the
/// exponential of a matrix, twenty-five years later", SIAM Review 45(1), method 3). Relative error about 1e-14.
Eigen::MatrixXd matrix_exponential(const Eigen::MatrixXd& a);

} // namespace windage
