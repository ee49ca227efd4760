# Finds SystemC and always yields the target SystemC::systemc. Upstream's build installs a CMake package
# (SystemCLanguage); Debian ships only systemc.pc. A target that is there already, of a SystemC built as a part of the
# same project say, is taken as it is.
set(SystemC_WHERE "the target SystemC::systemc")
if(NOT TARGET SystemC::systemc)
  find_package(SystemCLanguage CONFIG QUIET)
  mark_as_advanced(SystemCLanguage_DIR)
  set(SystemC_VERSION ${SystemCLanguage_VERSION})
  set(SystemC_WHERE ${SystemCLanguage_CONFIG})
endif()
if(NOT TARGET SystemC::systemc)
  find_package(PkgConfig QUIET)
  if(PkgConfig_FOUND)
    pkg_check_modules(EARSHOT_SYSTEMC QUIET IMPORTED_TARGET GLOBAL systemc)
  endif()
  if(EARSHOT_SYSTEMC_FOUND)
    # Not an alias: an export would name what it stands for, which another way of finding SystemC does not yield.
    add_library(SystemC::systemc INTERFACE IMPORTED GLOBAL)
    target_link_libraries(SystemC::systemc INTERFACE PkgConfig::EARSHOT_SYSTEMC)
    set(SystemC_VERSION ${EARSHOT_SYSTEMC_VERSION})
    set(SystemC_WHERE ${EARSHOT_SYSTEMC_LINK_LIBRARIES})
  endif()
endif()

if(TARGET SystemC::systemc)
  set(SystemC_TARGET SystemC::systemc)
endif()
if(NOT SystemC_VERSION)  # the package does not say
  set(SystemC_VERSION ${SystemC_FIND_VERSION})
endif()
include(FindPackageHandleStandardArgs)
find_package_handle_standard_args(
  SystemC REQUIRED_VARS SystemC_WHERE SystemC_TARGET VERSION_VAR SystemC_VERSION
  REASON_FAILURE_MESSAGE
    "neither as a CMake package (SystemCLanguage, set CMAKE_PREFIX_PATH) nor by pkg-config (systemc.pc, set \
PKG_CONFIG_PATH). On Debian: apt-get install libsystemc-dev")
