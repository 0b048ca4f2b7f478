// The plant of a loop: the one place that knows every kind of plant.
#pragma once

#include <memory>

#include <windage/loop/description.hpp>
#include <windage/plant/plant.hpp>

namespace windage {

std::unique_ptr<plant> make_plant(const loop_description& d, const plant_timing& timing, const plant_disturbances& w,
                                  signal_arena& arena);

} // namespace windage
