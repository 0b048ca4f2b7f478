// Python dicts to descriptions; the fields are those of the C++ structs, name for name.
#pragma once

#include <pybind11/pybind11.h>

#include <windage/campaign/description.hpp>

namespace windage::bindings {

study_description read_study(pybind11::handle source);
measure_description read_measure(pybind11::handle source, const std::string& path);
spread_description read_spread(pybind11::handle source, const std::string& path);
discretisation_kind read_discretisation(const std::string& name);

} // namespace windage::bindings
