# `cpack --config build/CPackConfig.cmake` makes one Debian package of what is installed: the command, and all that a
# platform is compiled with. The libraries the command needs are found by dpkg-shlibdeps; the others are what our
# headers and CMake package ask for.
set(CPACK_GENERATOR DEB)
set(CPACK_PACKAGE_NAME earshot)
set(CPACK_PACKAGE_CONTACT "The Earshot authors <earshot@example.invalid>" CACHE STRING
    "Maintainer of the Debian package: a name and an address")
set(CPACK_PACKAGE_DESCRIPTION_SUMMARY "coherent cache, bus and memory models for SystemC/TLM-2.0")
set(CPACK_PACKAGE_DESCRIPTION
    "Modules that bind into a SystemC/TLM-2.0 virtual platform (coherent caches, a
snooping bus, memory and a DRAM controller), and a command that plays a
recording of a program through them and says what coherence, bus and memory
cost it. Estimates for early decisions, to be calibrated against RTL or silicon.")
set(CPACK_PACKAGING_INSTALL_PREFIX /usr)
set(CPACK_STRIP_FILES ON)
set(CPACK_DEBIAN_FILE_NAME DEB-DEFAULT)
set(CPACK_DEBIAN_PACKAGE_SECTION electronics)
set(CPACK_DEBIAN_PACKAGE_SHLIBDEPS ON)
set(CPACK_DEBIAN_PACKAGE_CONTROL_STRICT_PERMISSION ON)
set(CPACK_DEBIAN_PACKAGE_DEPENDS "libsystemc-dev (>= 2.3.4), libzstd-dev, zlib1g-dev")
set(CPACK_DEBIAN_PACKAGE_RECOMMENDS "g++ | c++-compiler, pkg-config")
set(CPACK_DEBIAN_PACKAGE_SUGGESTS "cmake (>= 3.21)")
install(FILES ${CMAKE_CURRENT_LIST_DIR}/debian-copyright DESTINATION ${CMAKE_INSTALL_DOCDIR} RENAME copyright)
include(CPack)
