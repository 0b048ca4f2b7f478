# The instruction sets that the engine is built for. Each becomes a whole extension module of its own, so that no inline
# function compiled for a newer processor can end up in the module of an older one.
if(CMAKE_SYSTEM_PROCESSOR MATCHES "^(x86_64|AMD64|amd64)$")
  set(WINDAGE_INSTRUCTION_SETS "v2;v3;v4" CACHE STRING "x86-64 levels to build: v2, v3, v4")
  set(windage_flags_v2 -march=x86-64-v2)
  set(windage_flags_v3 -march=x86-64-v3)
  # Without the preference g++ and clang use only half of a 512-bit register.
  set(windage_flags_v4 -march=x86-64-v4 -mprefer-vector-width=512)
  set(WINDAGE_BASELINE v2)
elseif(CMAKE_SYSTEM_PROCESSOR MATCHES "^(aarch64|arm64)$")
  set(WINDAGE_INSTRUCTION_SETS "neon" CACHE STRING "Arm instruction sets to build: neon")
  set(windage_flags_neon -march=armv8-a)
  set(WINDAGE_BASELINE neon)
else()
  message(FATAL_ERROR "windage is built for x86-64 and 64-bit Arm; this processor is ${CMAKE_SYSTEM_PROCESSOR}.")
endif()
