# The C++ library: one static library for the oldest supported processor (or what WINDAGE_LIBRARY_FLAGS say), its headers
# and a CMake package. Headers reached from windage/campaign/campaign.hpp and windage/evidence/ hold plain numbers only,
# so a program compiled with other flags can use them.
include(CMakePackageConfigHelpers)
include(GNUInstallDirs)

set(WINDAGE_LIBRARY_INSTRUCTION_SET ${WINDAGE_BASELINE} CACHE STRING "Instruction set of the C++ library")
windage_add_engine(windage_engine ${WINDAGE_LIBRARY_INSTRUCTION_SET})

add_library(windage STATIC $<TARGET_OBJECTS:windage_engine> $<TARGET_OBJECTS:windage_evidence>)
add_library(windage::windage ALIAS windage)
target_include_directories(windage PUBLIC
  $<BUILD_INTERFACE:${PROJECT_SOURCE_DIR}/cpp/include> $<INSTALL_INTERFACE:${CMAKE_INSTALL_INCLUDEDIR}>)
target_compile_features(windage PUBLIC cxx_std_20)
target_link_libraries(windage PUBLIC TBB::tbb Threads::Threads)

install(TARGETS windage EXPORT windage_targets ARCHIVE DESTINATION ${CMAKE_INSTALL_LIBDIR})
install(DIRECTORY ${PROJECT_SOURCE_DIR}/cpp/include/windage DESTINATION ${CMAKE_INSTALL_INCLUDEDIR})
install(EXPORT windage_targets NAMESPACE windage:: DESTINATION ${CMAKE_INSTALL_LIBDIR}/cmake/windage)
configure_package_config_file(${CMAKE_CURRENT_LIST_DIR}/windageConfig.cmake.in
  ${CMAKE_CURRENT_BINARY_DIR}/windageConfig.cmake INSTALL_DESTINATION ${CMAKE_INSTALL_LIBDIR}/cmake/windage)
write_basic_package_version_file(${CMAKE_CURRENT_BINARY_DIR}/windageConfigVersion.cmake COMPATIBILITY SameMinorVersion)
install(FILES ${CMAKE_CURRENT_BINARY_DIR}/windageConfig.cmake ${CMAKE_CURRENT_BINARY_DIR}/windageConfigVersion.cmake
  DESTINATION ${CMAKE_INSTALL_LIBDIR}/cmake/windage)
