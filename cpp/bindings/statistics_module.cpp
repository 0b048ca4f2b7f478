// The extension module windage._statistics: the exact statistics behind verdicts. It is built once, for the baseline
// instruction set: nothing here is in the trial path.
#include <pybind11/pybind11.h>

void bind_evidence(pybind11::module_& m);

PYBIND11_MODULE(_statistics, m) {
    m.doc() = "Exact binomial bounds, numbers of trials and order statistics.";
    bind_evidence(m);
}
