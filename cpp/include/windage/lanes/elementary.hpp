// All elementary functions on packs; each header states domain, special values and largest measured error.
#pragma once

#include <windage/lanes/exponential.hpp>
#include <windage/lanes/hyperbolic.hpp>
#include <windage/lanes/inverse_trigonometric.hpp>
#include <windage/lanes/power.hpp>
#include <windage/lanes/rounding.hpp>
#include <windage/lanes/trigonometric.hpp>
