// A C++ program that uses the installed library: a first-order plant with spread gain under output-based ADRC.
// Prints the peak error of each trial with all its digits, then the exact bound on the pass probability.
#include <cstdio>
#include <vector>

#include <windage/campaign/campaign.hpp>
#include <windage/evidence/binomial_bounds.hpp>

int main() {
    windage::study_description study;
    study.seed = 7;
    study.spreads = {{"gain", windage::spread_kind::uniform, {0.8, 1.3}, 11}};
    study.loop.sample_period = 0.01;
    study.loop.duration = 3.0;
    study.loop.plant.kind = windage::plant_kind::first_order;
    study.loop.plant.states = {"x"};
    study.loop.plant.initial_state = {0.0};
    study.loop.plant.numbers = {windage::number::drawn(0), 1.0};
    study.loop.controller.controller_bandwidth = 4.0;
    study.loop.controller.observer_bandwidth = 40.0;
    study.loop.reference = {windage::time_function_kind::step, {1.0, 0.0, 0.0}};
    study.loop.sensor.noise = 1e-3;
    study.measures = {{windage::measure_kind::peak, "error", 1.0}};

    constexpr std::size_t trials = 40;
    std::vector<double> gains(trials), peaks(trials);
    std::vector<std::uint8_t> status(trials);
    const windage::campaign campaign(study);
    campaign.run({0, trials}, {gains.data(), peaks.data(), status.data(), trials}, {});
    std::uint64_t failures = 0;
    for (double peak : peaks) {
        std::printf("%.17g\n", peak);
        failures += peak > 0.03;
    }
    std::printf("%.17g\n", windage::evidence::clopper_pearson_lower(failures, trials, 0.95));
}
