// What this processor can do, asked before an engine module is chosen. Compiled for the oldest supported processor.
#include <Python.h>

#include <string>
#include <vector>

#if defined(__x86_64__)
#include <cpuid.h>
#endif

namespace {

#if defined(__x86_64__)
bool has_bit(unsigned leaf, int which, unsigned bit) {
    unsigned r[4] = {0, 0, 0, 0};
    if (!__get_cpuid(leaf, &r[0], &r[1], &r[2], &r[3])) return false;
    return (r[which] >> bit) & 1u;
}
#endif

// Features of an x86-64 level that this processor lacks. The built-in names below are those that both g++ 12 and
// clang 14 accept; the others are asked of the processor itself.
std::vector<std::string> missing(const std::string& instruction_set) {
    std::vector<std::string> lacks;
#if defined(__x86_64__)
    __builtin_cpu_init();
    const auto need = [&](bool present, const char* name) {
        if (!present) lacks.emplace_back(name);
    };
    need(__builtin_cpu_supports("sse4.2") != 0, "sse4.2");
    need(__builtin_cpu_supports("popcnt") != 0, "popcnt");
    if (instruction_set == "v2") return lacks;
    need(__builtin_cpu_supports("avx2") != 0, "avx2");
    need(__builtin_cpu_supports("fma") != 0, "fma");
    need(__builtin_cpu_supports("bmi") != 0, "bmi");
    need(__builtin_cpu_supports("bmi2") != 0, "bmi2");
    need(has_bit(0x80000001u, 2, 5), "lzcnt");
    need(has_bit(1u, 2, 22), "movbe");
    need(has_bit(1u, 2, 29), "f16c");
    if (instruction_set == "v3") return lacks;
    need(__builtin_cpu_supports("avx512f") != 0, "avx512f");
    need(__builtin_cpu_supports("avx512bw") != 0, "avx512bw");
    need(__builtin_cpu_supports("avx512cd") != 0, "avx512cd");
    need(__builtin_cpu_supports("avx512dq") != 0, "avx512dq");
    need(__builtin_cpu_supports("avx512vl") != 0, "avx512vl");
#else
    (void)instruction_set; // the one Arm build needs nothing beyond the architecture
#endif
    return lacks;
}

} // namespace

namespace {

PyObject* missing_in_python(PyObject*, PyObject* name) {
    const char* text = PyUnicode_AsUTF8(name);
    if (!text) return nullptr;
    PyObject* list = PyList_New(0);
    if (!list) return nullptr;
    for (const std::string& feature : missing(text)) {
        PyObject* item = PyUnicode_FromString(feature.c_str());
        const int failed = item ? PyList_Append(list, item) : -1;
        Py_XDECREF(item);
        if (failed) {
            Py_DECREF(list);
            return nullptr;
        }
    }
    return list;
}

PyMethodDef methods[] = {{"missing", missing_in_python, METH_O,
                          "Features of an instruction set that this processor lacks; empty where it can run it."},
                         {nullptr, nullptr, 0, nullptr}};
PyModuleDef definition = {
    PyModuleDef_HEAD_INIT, "_processor", "What this processor can do.", 0, methods, nullptr, nullptr, nullptr, nullptr};

} // namespace

// Python's own interface rather than pybind11's: one function does not pay for eight seconds of compiling.
PyMODINIT_FUNC PyInit__processor() { return PyModule_Create(&definition); }
