# Eigen, Boost headers and oneTBB, in this order of preference: named explicitly (-DEigen3_DIR=...), installed on the
# system, or installed as packages of the running Python (the build requirements in pyproject.toml).
find_package(Threads REQUIRED)
if(WINDAGE_PYTHON)
  find_package(Python 3.11 COMPONENTS Interpreter Development.Module REQUIRED)
else()
  find_package(Python 3.11 COMPONENTS Interpreter QUIET)
endif()

if(Python_EXECUTABLE)
  execute_process(
    COMMAND ${Python_EXECUTABLE} ${CMAKE_CURRENT_LIST_DIR}/locate_packages.py
    OUTPUT_VARIABLE windage_located OUTPUT_STRIP_TRAILING_WHITESPACE ERROR_QUIET)
  foreach(line IN LISTS windage_located)
    string(REPLACE "=" ";" pair "${line}")
    list(GET pair 0 name)
    list(GET pair 1 value)
    set(windage_${name} "${value}")
  endforeach()
endif()

find_package(Eigen3 3.4 CONFIG QUIET)
if(NOT TARGET Eigen3::Eigen)
  find_path(WINDAGE_EIGEN_INCLUDE Eigen/Core HINTS ${windage_eigen} PATH_SUFFIXES eigen3)
  if(NOT WINDAGE_EIGEN_INCLUDE)
    message(FATAL_ERROR "Eigen 3.4 was not found. Install libeigen3-dev, or the Python package cmeel-eigen, "
                        "or pass -DEigen3_DIR=<folder of Eigen3Config.cmake>.")
  endif()
  add_library(Eigen3::Eigen INTERFACE IMPORTED)
  target_include_directories(Eigen3::Eigen SYSTEM INTERFACE ${WINDAGE_EIGEN_INCLUDE})
endif()

find_path(WINDAGE_BOOST_INCLUDE boost/numeric/odeint.hpp HINTS ${BOOST_ROOT} ${windage_boost})
if(NOT WINDAGE_BOOST_INCLUDE)
  message(FATAL_ERROR "The Boost headers were not found. Install libboost-dev, or the Python package boost-headers, "
                      "or pass -DBOOST_ROOT=<folder that holds boost/>.")
endif()
add_library(windage_boost INTERFACE)
target_include_directories(windage_boost SYSTEM INTERFACE $<BUILD_INTERFACE:${WINDAGE_BOOST_INCLUDE}>)

find_package(TBB 2021 CONFIG QUIET HINTS ${windage_tbb})
if(NOT TARGET TBB::tbb)
  find_path(WINDAGE_TBB_INCLUDE oneapi/tbb/task_arena.h HINTS ${windage_tbb}/include)
  find_library(WINDAGE_TBB_LIBRARY NAMES tbb libtbb.so.12 HINTS ${windage_tbb}/lib)
  if(NOT WINDAGE_TBB_INCLUDE OR NOT WINDAGE_TBB_LIBRARY)
    message(FATAL_ERROR "oneTBB was not found. Install libtbb-dev, or the Python package tbb-devel, "
                        "or pass -DTBB_DIR=<folder of TBBConfig.cmake>.")
  endif()
  add_library(TBB::tbb SHARED IMPORTED)
  set_target_properties(TBB::tbb PROPERTIES
    IMPORTED_LOCATION ${WINDAGE_TBB_LIBRARY} INTERFACE_INCLUDE_DIRECTORIES ${WINDAGE_TBB_INCLUDE})
endif()
