// Binds the evidence functions: plain numbers in, plain numbers out, no logic. Friendly checks and wording are Python's
// part (windage/_evidence.py); here a wrong argument is the ValueError that pybind11 makes of std::invalid_argument.
#include <pybind11/pybind11.h>
#include <pybind11/stl.h>

#include <windage/evidence/binomial_bounds.hpp>
#include <windage/evidence/claim.hpp>
#include <windage/evidence/order_statistics.hpp>
#include <windage/evidence/probability.hpp>
#include <windage/evidence/trial_counts.hpp>

#include <cstdint>
#include <optional>
#include <string>
#include <utility>

namespace py = pybind11;
namespace ev = windage::evidence;

namespace {

using one_sided = double (*)(std::int64_t, std::int64_t, double);
using two_sided = ev::interval (*)(std::int64_t, std::int64_t, double);

/// The three forms of one method under one name: NAME_lower, NAME_upper, NAME_interval.
void bind_method(py::module_& m, const std::string& name, const std::string& title, one_sided lower, one_sided upper,
                 two_sided both) {
    const auto failures = py::arg("failures"), trials = py::arg("trials"), confidence = py::arg("confidence");
    m.def((name + "_lower").c_str(), lower, failures, trials, confidence,
          (title + " one-sided lower bound of the pass probability.").c_str());
    m.def((name + "_upper").c_str(), upper, failures, trials, confidence,
          (title + " one-sided upper bound of the pass probability.").c_str());
    m.def((name + "_interval").c_str(),
          [both](std::int64_t failed, std::int64_t run, double sure) {
              const ev::interval found = both(failed, run, sure);
              return std::pair(found.lower, found.upper);
          },
          failures, trials, confidence,
          (title + " two-sided interval (lower, upper) of the pass probability.").c_str());
}

void bind_bounds(py::module_& m) {
    bind_method(m, "clopper_pearson", "Clopper-Pearson (1934, Biometrika 26:404) exact", ev::clopper_pearson_lower,
                ev::clopper_pearson_upper, ev::clopper_pearson_interval);
    bind_method(m, "wilson", "Wilson (1927, JASA 22:209) score", ev::wilson_lower, ev::wilson_upper,
                ev::wilson_interval);
    bind_method(m, "jeffreys", "Jeffreys prior Beta(1/2, 1/2)", ev::jeffreys_lower, ev::jeffreys_upper,
                ev::jeffreys_interval);
    m.def("zero_failure_upper", ev::zero_failure_upper, py::arg("trials"), py::arg("confidence"),
          "Upper bound 1 - risk^(1/trials) of the failure probability when no trial failed.");
    m.def("binomial_at_most", &ev::binomial_at_most, py::arg("events"), py::arg("trials"), py::arg("probability"),
          "P[X <= events] of a binomial count. Arguments are not checked.");
    m.def("binomial_at_least", &ev::binomial_at_least, py::arg("events"), py::arg("trials"), py::arg("probability"),
          "P[X >= events] of a binomial count. Arguments are not checked.");
    m.def("complement", &ev::complement, py::arg("probability"),
          "1 - probability, where a probability of at most 15 decimals means exactly these decimals.");
}

void bind_claims(py::module_& m) {
    const auto failures = py::arg("failures"), trials = py::arg("trials");
    const auto at_least = py::arg("at_least"), confidence = py::arg("confidence");
    m.def("claim_demonstrated", ev::claim_demonstrated, failures, trials, at_least, confidence,
          "True if the one-sided lower Clopper-Pearson bound of the pass probability reaches at_least.");
    m.def("claim_refuted", ev::claim_refuted, failures, trials, at_least, confidence,
          "True if the one-sided upper Clopper-Pearson bound of the pass probability is below at_least.");
    m.def("further_trials", ev::further_trials, failures, trials, at_least, confidence,
          "Further trials that would decide the claim if failures went on at the observed rate; 0 if it is decided, "
          "None if the observed rate equals the limit or more than 10^12 trials are needed.");
}

void bind_trial_counts(py::module_& m) {
    const auto confidence = py::arg("confidence");
    m.def("trials_to_demonstrate", ev::trials_to_demonstrate, py::arg("probability"), confidence,
          py::arg("allowed_failures"),
          "Smallest number of trials such that at most allowed_failures failures prove the pass probability "
          "(Hanson & Beard 2010, NASA/TP-2010-216447).");
    m.def("allowed_failures", ev::allowed_failures, py::arg("trials"), py::arg("probability"), confidence,
          "Most failures with which these trials still prove the pass probability; None if not even 0 do.");
    m.def("trials_with_at_most", ev::trials_with_at_most, py::arg("events"), py::arg("event_probability"), confidence,
          "Largest number of trials that shows at most this many events at the given confidence.");
    m.def("chernoff_trials", ev::chernoff_trials, py::arg("accuracy"), confidence,
          "ceil(ln(2/risk) / (2 accuracy^2)): trials for an observed fraction within +-accuracy (Hoeffding 1963).");
    m.def("log_over_log_trials", ev::log_over_log_trials, py::arg("exceedance"), confidence,
          "ceil(ln(1/risk) / ln(1/(1 - exceedance))): trials whose largest value is exceeded with at most the "
          "probability `exceedance` (Tempo, Bai & Dabbene 1997).");
}

void bind_order_statistics(py::module_& m) {
    const auto content = py::arg("content"), confidence = py::arg("confidence");
    m.def(
        "tolerance_rank",
        [](std::int64_t trials, double part, double sure) -> std::optional<std::pair<std::int64_t, double>> {
            const auto limit = ev::tolerance_rank(trials, part, sure);
            if (!limit) return std::nullopt;
            return std::pair(limit->rank, limit->attained_confidence);
        },
        py::arg("trials"), content, confidence,
        "(rank, attained confidence) of the upper tolerance bound, rank 1 being the smallest value; None if the "
        "trials are too few (Wilks 1941).");
    m.def("wilks_one_sided", ev::wilks_one_sided, content, confidence, py::arg("order") = 1,
          "Smallest number of trials whose order-th largest value is an upper tolerance bound (Wilks 1941).");
    m.def("wilks_two_sided", ev::wilks_two_sided, content, confidence,
          "Smallest number of trials whose smallest and largest value enclose the content (Wilks 1941).");
}

} // namespace

void bind_evidence(pybind11::module_& m) {
    bind_bounds(m);
    bind_claims(m);
    bind_trial_counts(m);
    bind_order_statistics(m);
}
