# Defaults of every target. The digits of a trial depend on the contraction flag (DEVELOPERS.md, "Same digits").
if(NOT CMAKE_BUILD_TYPE AND NOT CMAKE_CONFIGURATION_TYPES)
  set(CMAKE_BUILD_TYPE Release)
endif()
set(CMAKE_CXX_STANDARD 20)
set(CMAKE_CXX_STANDARD_REQUIRED ON)
set(CMAKE_CXX_EXTENSIONS OFF)
set(CMAKE_CXX_VISIBILITY_PRESET hidden)
set(CMAKE_VISIBILITY_INLINES_HIDDEN ON)
set(CMAKE_POSITION_INDEPENDENT_CODE ON)
set(CMAKE_EXPORT_COMPILE_COMMANDS ON)

add_library(windage_flags INTERFACE)
target_compile_options(windage_flags INTERFACE
  -ffp-contract=off      # never fuse a*b+c: the bits would depend on the machine
  -fno-math-errno        # a square root is one instruction
  -fno-trapping-math     # selections may evaluate both sides
  -Wall -Wextra -Wno-psabi)
# Eigen's own vectorisation changes the order of sums with the register width.
target_compile_definitions(windage_flags INTERFACE EIGEN_DONT_VECTORIZE)
if(CMAKE_CXX_FLAGS MATCHES "-ffast-math|-Ofast|-funsafe-math|-ffp-contract=(on|fast)")
  message(FATAL_ERROR "windage cannot be built with fast-math or contraction: the same trial would have other digits "
                      "on another machine. Remove the flag from CMAKE_CXX_FLAGS.")
endif()
