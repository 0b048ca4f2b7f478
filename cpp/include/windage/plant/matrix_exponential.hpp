// The exact motion of linear systems over a step, one system a lane, by the matrix exponential.
#pragma once

#include <windage/plant/linear_model.hpp>

namespace windage {

/// What drives a system x' = A x + G v: inputs that move by themselves, v' = S v. An empty S: all of them are held.
struct drive {
    lane_matrix g, s;
};

/// x(t + h) = Phi x(t) + Gamma v(t).
struct step_matrices {
    lane_matrix phi, gamma;
    /// Estimated error of Phi in the units of the states that balance A, a lane; not finite where there is no result.
    wide error = 0.0;
};

/// The upper rows of exp([A G; 0 S] h) (Van Loan 1978, IEEE TAC 23(3) 395-404).
///
/// Scaling and squaring with a Taylor series (Moler & Van Loan 2003, SIAM Review 45(1) 3-49, method 3) in balanced
/// units; each lane is scaled by its own norm, so that its digits do not depend on its neighbours. Lanes that need more
/// than two squarings are computed with twice the digits, since rounding grows with each of them; where the norms on
/// the way do not exclude that too much is lost even so, the result is compared with that of one squaring more.
/// `a_low`: what rounding has left of A, or empty.
step_matrices transition(const lane_matrix& a, const lane_matrix& a_low, const drive& v, wide h);

} // namespace windage
