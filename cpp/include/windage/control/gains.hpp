// Gains of linear active disturbance rejection control by bandwidth parameterisation.
// Gao 2003, "Scaling and bandwidth-parameterization based controller tuning", ACC, doi 10.1109/ACC.2003.1242516:
// all controller poles at -omega_c, all observer poles at -omega_o (sampled: at exp(-omega_o Ts); Miklosovic, Radke,
// Gao 2006, ACC, doi 10.1109/ACC.2006.1656547).
#pragma once

#include <windage/control/description.hpp>
#include <windage/control/limits.hpp>
#include <windage/lanes/pack.hpp>

namespace windage {

/// k_i = C(n, i-1) omega_c^(n-i+1) into gains[0 .. n-1].
void controller_gains(int order, wide bandwidth, wide* gains);

/// l_i = C(n+1, i) omega_o^i of the continuous observer into gains[0 .. n].
void continuous_observer_gains(int order, wide bandwidth, wide* gains);

/// Correction gains of the current observer into gains[0 .. n].
void observer_gains(int order, discretisation_kind kind, wide bandwidth, wide sample_period, wide* gains);

} // namespace windage
