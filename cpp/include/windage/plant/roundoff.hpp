// What rounding does to the output of a recurrence x_{k+1} = Phi x_k + Gamma v_k, y_k = C x_k, estimated beforehand.
#pragma once

#include <windage/plant/linear_model.hpp>

namespace windage {

/// About the largest error that rounding leaves in the response to a unit step of the worst input, relative to
/// the largest output of that response, over 2^14 samples; one recurrence a lane. From where a motion no longer fits
/// into the numbers on, it is left out.
///
/// Each state is rounded once a sample by its own size, and the rounding reaches the output through the later motion
/// (roundoff noise: Mullis & Roberts 1976, "Synthesis of minimum roundoff noise fixed point digital filters", IEEE
/// Trans. Circuits and Systems 23(9) 551-562, from memory). Sizes and weights are taken at samples 1, 2, 4, ...
wide relative_roundoff(const lane_matrix& phi, const lane_matrix& gamma, const lane_matrix& c);

} // namespace windage
