// Largest order of a controller. The observer gains come from powers of a Pascal-like matrix whose condition grows
// quickly; above this order double precision no longer places the poles (tests/external/test_adrc_gains.py).
#pragma once

namespace windage {

inline constexpr int max_order = 8;

} // namespace windage
