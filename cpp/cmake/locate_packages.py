"""Print where Eigen, Boost and oneTBB lie among the packages of this Python, as name=folder pairs for CMake.

In an isolated build the packages are in an overlay that `sysconfig` does not know; the metadata of the packages does.
"""

from importlib.metadata import PackageNotFoundError, files

WANTED = (
    ("eigen", "cmeel-eigen", "Eigen/Core", 2),
    ("boost", "boost-headers", "boost/version.hpp", 2),
    ("boost", "cmeel-boost", "boost/version.hpp", 2),
    ("tbb", "tbb-devel", "include/oneapi/tbb/version.h", 4),
)

found: dict[str, str] = {}
for name, package, tail, levels in WANTED:
    try:
        listed = files(package) or []
    except PackageNotFoundError:
        continue
    for path in listed:
        if name not in found and str(path).replace("\\", "/").endswith(tail):
            found[name] = str(path.locate().resolve().parents[levels - 1])
print(";".join(f"{name}={folder}" for name, folder in found.items()))
