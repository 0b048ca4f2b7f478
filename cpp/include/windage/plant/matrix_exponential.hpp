// The exact motion of linear systems over a step, one system a lane, by the matrix exponential.
#pragma once

#include <windage/plant/linear_model.hpp>

namespace windage {

/// [Phi Gamma_u Gamma_w]: x(t + h) = Phi x(t) + Gamma_u u + Gamma_w w for a held input and held disturbances, as the
/// upper rows of exp([A B E; 0 0 0] h) (Van Loan 1978, IEEE TAC 23(3) 395-404).
///
/// Scaling and squaring with a Taylor series of degree 16 at a norm of 1/2 (Moler & Van Loan 2003, SIAM Review 45(1)
/// 3-49, method 3); each lane is scaled by its own norm, so that its digits do not depend on its neighbours.
lane_matrix transition(const linear_model& m, wide h);

} // namespace windage
