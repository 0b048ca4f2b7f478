// A trial that cannot be computed rightly: refused before its first sample, rather than run to a wrong result.
#pragma once

#include <stdexcept>
#include <string>

#include <windage/lanes/signal.hpp>

namespace windage {

class refused_trial : public std::invalid_argument {
public:
    refused_trial(const trial_block& block, std::size_t lane, const std::string& reason)
        : std::invalid_argument("plant: trial " + std::to_string(block.trials[lane]) + " " + reason) {}
};

} // namespace windage
