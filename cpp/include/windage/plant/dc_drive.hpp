// Permanent-magnet DC drive with friction: voltage in, angle or speed out, load torque as disturbance.
//     L di/dt = u - R i - K omega
//     J domega/dt = K i - B omega - Tc tanh(omega / omega_s) - load
//     dtheta/dt = omega
// States: angle (rad), speed (rad/s), current (A). Numbers: resistance R (Ohm), inductance L (H), torque constant K
// (N m/A = V s), inertia J (kg m^2), viscous friction B (N m s), Coulomb friction Tc (N m), smoothing speed omega_s.
#pragma once

#include <array>

#include <windage/lanes/elementary.hpp>

namespace windage {

class dc_drive {
public:
    static constexpr int states = 3, numbers = 7, disturbances = 1;

    static void derive(wide* n) {
        for (int divisor : {1, 3, 6}) n[divisor] = 1.0 / n[divisor];
    }
    WINDAGE_INLINE explicit dc_drive(const wide* n)
        : resistance_(n[0]), inverse_inductance_(n[1]), constant_(n[2]), inverse_inertia_(n[3]), viscous_(n[4]),
          coulomb_(n[5]), inverse_smoothing_(n[6]) {}

    WINDAGE_INLINE void operator()(const std::array<wide, 3>& x, std::array<wide, 3>& dx, wide voltage,
                                   const wide* w) const {
        const wide speed = x[1], current = x[2];
        const wide friction = viscous_ * speed + coulomb_ * hyperbolic_tangent(speed * inverse_smoothing_);
        dx[0] = speed;
        dx[1] = (constant_ * current - friction - w[0]) * inverse_inertia_;
        dx[2] = (voltage - resistance_ * current - constant_ * speed) * inverse_inductance_;
    }

private:
    wide resistance_, inverse_inductance_, constant_, inverse_inertia_, viscous_, coulomb_, inverse_smoothing_;
};

} // namespace windage
