# Finds SystemC 2.3.4 or newer and always yields the target SystemC::systemc.
# Upstream's build installs a CMake package (SystemCLanguage); Debian ships only systemc.pc.
if(TARGET SystemC::systemc)
  return()
endif()

find_package(SystemCLanguage CONFIG QUIET)
if(TARGET SystemC::systemc)
  return()
endif()

find_package(PkgConfig REQUIRED)
pkg_check_modules(SystemC QUIET IMPORTED_TARGET GLOBAL systemc>=2.3.4)
if(NOT SystemC_FOUND)
  message(FATAL_ERROR "SystemC was found neither as a CMake package (SystemCLanguage, set CMAKE_PREFIX_PATH) nor by "
                      "pkg-config (systemc.pc, set PKG_CONFIG_PATH). On Debian: apt-get install libsystemc-dev")
endif()
add_library(SystemC::systemc ALIAS PkgConfig::SystemC)
