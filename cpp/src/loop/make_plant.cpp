#include "make_plant.hpp"

#include <windage/plant/dc_drive.hpp>
#include <windage/plant/equation_plant.hpp>
#include <windage/plant/linear_ode.hpp>
#include <windage/plant/linear_plant.hpp>
#include <windage/plant/native_plant.hpp>
#include <windage/plant/two_mass_drive.hpp>

namespace windage {

std::unique_ptr<plant> make_plant(const loop_description& d, const plant_timing& timing, const plant_disturbances& w,
                                  signal_arena& arena) {
    const integration_settings settings{d.integrator, d.steps_per_sample, d.reference_tolerance,
                                        d.actuator.time_constant};
    switch (d.plant.kind) {
    case plant_kind::equations: return std::make_unique<equation_plant>(d.plant, settings, timing, w, arena);
    case plant_kind::dc_drive: return std::make_unique<native_plant<dc_drive>>(d.plant, settings, timing, w, arena);
    case plant_kind::two_mass_drive:
        return std::make_unique<native_plant<two_mass_drive>>(d.plant, settings, timing, w, arena);
    default: break;
    }
    if (d.integrator == integrator_kind::reference)
        return std::make_unique<linear_ode>(d.plant, settings, timing, w, arena);
    return std::make_unique<linear_plant>(d.plant, settings.lag, timing, w, arena);
}

} // namespace windage
