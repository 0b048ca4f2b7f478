// Jerk-limited motion from rest to rest: up to seven phases of constant jerk (the double-S profile; Biagiotti &
// Melchiorri 2008, Trajectory Planning for Automatic Machines and Robots, section 3.4, from memory), shared by
// acceleration and, mirrored in time, deceleration.
#pragma once

#include <windage/lanes/elementary.hpp>
#include <windage/lanes/signal.hpp>

namespace windage {

/// Times and rates of a profile.
struct profile_plan {
    wide distance;     ///< >= 0
    wide jerk;         ///< highest
    wide jerk_time;    ///< length of a phase of constant jerk
    wide accelerating; ///< length of the whole acceleration
    wide total;        ///< length of the motion

    void store(const signal* to, std::size_t i) const {
        const wide parts[5] = {distance, jerk, jerk_time, accelerating, total};
        for (int k = 0; k < 5; ++k) parts[k].store(to[k] + i);
    }
    static profile_plan load(const signal* from, std::size_t i) {
        wide parts[5];
        for (int k = 0; k < 5; ++k) parts[k] = wide::load(from[k] + i);
        return {parts[0], parts[1], parts[2], parts[3], parts[4]};
    }
};

inline profile_plan plan_profile(wide amplitude, wide speed, wide acceleration, wide jerk) {
    const wide distance = absolute(amplitude);
    // With the speed limit reached: is the acceleration limit reached on the way?
    const auto full_acceleration = speed * jerk >= acceleration * acceleration;
    const wide jerk_time_fast = select(full_acceleration, acceleration / jerk, square_root(speed / jerk));
    const wide accelerating_fast =
        select(full_acceleration, jerk_time_fast + speed / acceleration, 2.0 * jerk_time_fast);
    const auto cruises = distance >= speed * accelerating_fast;
    // Without: acceleration limit reached, or not even that.
    const wide limit_time = acceleration / jerk;
    const auto long_enough = distance >= 2.0 * acceleration * limit_time * limit_time;
    const wide short_time = power(distance / (2.0 * jerk), wide(1.0 / 3.0));
    const wide jerk_time_slow = select(long_enough, limit_time, short_time);
    const wide accelerating_slow =
        select(long_enough, 0.5 * (limit_time + square_root(limit_time * limit_time + 4.0 * distance / acceleration)),
               2.0 * short_time);
    profile_plan p;
    p.distance = distance;
    p.jerk = jerk;
    p.jerk_time = select(cruises, jerk_time_fast, jerk_time_slow);
    p.accelerating = select(cruises, accelerating_fast, accelerating_slow);
    p.total = select(cruises, distance / speed + accelerating_fast, 2.0 * accelerating_slow);
    return p;
}

/// Position, speed, acceleration and jerk on the way up, `s` after the start and before the middle.
inline void accelerate(const profile_plan& p, wide s, wide sided, wide* motion) {
    const wide peak = p.jerk * p.jerk_time, speed = peak * (p.accelerating - p.jerk_time);
    const wide left = p.accelerating - s;
    const auto rising = sided < p.jerk_time, constant = sided < p.accelerating - p.jerk_time,
               falling = sided < p.accelerating;
    const wide half_way = 0.5 * speed * p.accelerating;
    motion[0] =
        select(rising, p.jerk * s * s * s / 6.0,
               select(constant, peak / 6.0 * (3.0 * s * (s - p.jerk_time) + p.jerk_time * p.jerk_time),
                      select(falling, speed * s - half_way + p.jerk * left * left * left / 6.0, speed * s - half_way)));
    motion[1] = select(
        rising, 0.5 * p.jerk * s * s,
        select(constant, peak * (s - 0.5 * p.jerk_time), select(falling, speed - 0.5 * p.jerk * left * left, speed)));
    motion[2] = select(rising, p.jerk * s, select(constant, peak, select(falling, p.jerk * left, 0.0)));
    motion[3] = select(rising, p.jerk, select(constant, wide(0.0), select(falling, -p.jerk, 0.0)));
}

/// Position, speed, acceleration and jerk `s` after the start of the motion (any s); `sided` is the same time moved to
/// one side of the jumps of the jerk.
inline void follow_profile(const profile_plan& p, wide s, wide sided, wide* motion) {
    const auto first_half = sided < 0.5 * p.total;
    accelerate(p, select(first_half, s, p.total - s), select(first_half, sided, p.total - sided), motion);
    const auto before = sided <= 0.0, after = sided >= p.total;
    motion[0] =
        select(before, wide(0.0), select(after, p.distance, select(first_half, motion[0], p.distance - motion[0])));
    motion[1] = select(before | after, wide(0.0), motion[1]);
    motion[2] = select(before | after, wide(0.0), select(first_half, motion[2], -motion[2]));
    motion[3] = select(before | after, wide(0.0), motion[3]);
}

} // namespace windage
