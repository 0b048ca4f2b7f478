// The engine module of one instruction set; exactly one of them is loaded (python/windage/_loader.py).
#include <oneapi/tbb/version.h>

#include <windage/lanes/pack.hpp>

#include "bind_engine.hpp"

PYBIND11_MODULE(WINDAGE_MODULE, m, pybind11::mod_gil_not_used()) {
    m.doc() = "The windage engine, compiled for one instruction set.";
    m.attr("instruction_set") = WINDAGE_INSTRUCTION_SET;
    m.attr("lanes") = windage::lanes;
    m.attr("compiler") = __VERSION__;
    m.attr("tbb_version") = std::to_string(TBB_VERSION_MAJOR) + "." + std::to_string(TBB_VERSION_MINOR);
    windage::bindings::bind_lanes(m);
    windage::bindings::bind_campaign(m);
}
