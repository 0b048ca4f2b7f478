// The parts of the engine module; module.cpp calls them in order.
#pragma once

#include <pybind11/pybind11.h>

namespace windage::bindings {

void bind_lanes(pybind11::module_& m);
void bind_campaign(pybind11::module_& m);

} // namespace windage::bindings
