// Two masses on an elastic shaft, with friction on the load side: torque in, load torque as disturbance.
//     tau = k (theta_m - theta_l) + c (omega_m - omega_l)
//     J_m domega_m/dt = u - tau
//     J_l domega_l/dt = tau - (Fc + (Fs - Fc) exp(-(omega_l / v_s)^2)) tanh(omega_l / v_0) - B omega_l - load
// (Stribeck friction after Armstrong-Helouvry, Dupont, Canudas de Wit 1994, Automatica 30(7), equation form from
// memory.) States: motor angle, motor speed, load angle, load speed. Numbers: J_m, J_l (kg m^2), k (N m/rad), c (N m
// s/rad), Fc, Fs (N m), v_s, v_0 (rad/s), B (N m s/rad).
#pragma once

#include <array>

#include <windage/lanes/elementary.hpp>

namespace windage {

class two_mass_drive {
public:
    static constexpr int states = 4, numbers = 9, disturbances = 1;

    static void derive(wide* n) {
        for (int divisor : {0, 1, 6, 7}) n[divisor] = 1.0 / n[divisor];
        n[5] = n[5] - n[4];
    }
    WINDAGE_INLINE explicit two_mass_drive(const wide* n)
        : inverse_motor_(n[0]), inverse_load_(n[1]), stiffness_(n[2]), damping_(n[3]), coulomb_(n[4]), breakaway_(n[5]),
          inverse_stribeck_(n[6]), inverse_smoothing_(n[7]), viscous_(n[8]) {}

    WINDAGE_INLINE void operator()(const std::array<wide, 4>& x, std::array<wide, 4>& dx, wide torque,
                                   const wide* w) const {
        const wide shaft = stiffness_ * (x[0] - x[2]) + damping_ * (x[1] - x[3]);
        const wide ratio = x[3] * inverse_stribeck_;
        const wide level = coulomb_ + breakaway_ * exponential(-(ratio * ratio));
        const wide friction = level * hyperbolic_tangent(x[3] * inverse_smoothing_) + viscous_ * x[3];
        dx[0] = x[1];
        dx[1] = (torque - shaft) * inverse_motor_;
        dx[2] = x[3];
        dx[3] = (shaft - friction - w[0]) * inverse_load_;
    }

private:
    wide inverse_motor_, inverse_load_, stiffness_, damping_, coulomb_, breakaway_, inverse_stribeck_,
        inverse_smoothing_, viscous_;
};

} // namespace windage
