# Installation: the library and its headers, a CMake package, pkg-config files, and the command with its configurations.
# Nothing in it depends on where the prefix is, so it may be moved.
include(GNUInstallDirs)
include(CMakePackageConfigHelpers)
set(package_folder ${CMAKE_INSTALL_LIBDIR}/cmake/Earshot)

install(TARGETS earshot_models earshot_recorder EXPORT EarshotTargets INCLUDES DESTINATION ${CMAKE_INSTALL_INCLUDEDIR})
get_target_property(public_headers earshot_models EARSHOT_PUBLIC_HEADERS)
foreach(header IN LISTS public_headers)
  cmake_path(RELATIVE_PATH header BASE_DIRECTORY ${PROJECT_SOURCE_DIR}/models OUTPUT_VARIABLE place)
  cmake_path(GET place PARENT_PATH room)
  install(FILES ${header} DESTINATION ${CMAKE_INSTALL_INCLUDEDIR}/earshot/${room})
endforeach()
install(FILES ${PROJECT_BINARY_DIR}/include/generated/earshot/version.h
        DESTINATION ${CMAKE_INSTALL_INCLUDEDIR}/earshot)

install(EXPORT EarshotTargets NAMESPACE earshot:: DESTINATION ${package_folder})
configure_package_config_file(${CMAKE_CURRENT_LIST_DIR}/EarshotConfig.cmake.in ${PROJECT_BINARY_DIR}/EarshotConfig.cmake
                              INSTALL_DESTINATION ${package_folder}
                              NO_SET_AND_CHECK_MACRO NO_CHECK_REQUIRED_COMPONENTS_MACRO)
# As the check of versions in the library: the same major and minor number.
write_basic_package_version_file(${PROJECT_BINARY_DIR}/EarshotConfigVersion.cmake COMPATIBILITY SameMinorVersion)
install(FILES ${PROJECT_BINARY_DIR}/EarshotConfig.cmake ${PROJECT_BINARY_DIR}/EarshotConfigVersion.cmake
              ${CMAKE_CURRENT_LIST_DIR}/FindSystemC.cmake ${CMAKE_CURRENT_LIST_DIR}/EarshotRecordable.cmake
        DESTINATION ${package_folder})

# Who links a static library also links what it needs; a shared one brings that itself.
get_target_property(library_type earshot_models TYPE)
set(needed "zlib libzstd")
if(library_type STREQUAL "SHARED_LIBRARY")
  set(requires "systemc >= 2.3.4")
  set(requires_private ${needed})
else()
  set(requires "systemc >= 2.3.4 ${needed}")
  set(requires_private "")
endif()
set(pc_folder ${CMAKE_INSTALL_FULL_LIBDIR}/pkgconfig)
file(RELATIVE_PATH to_include ${pc_folder} ${CMAKE_INSTALL_FULL_INCLUDEDIR})
configure_file(${CMAKE_CURRENT_LIST_DIR}/earshot.pc.in ${PROJECT_BINARY_DIR}/earshot.pc @ONLY)
install(FILES ${PROJECT_BINARY_DIR}/earshot.pc ${PROJECT_BINARY_DIR}/earshot-recorder.pc
        DESTINATION ${CMAKE_INSTALL_LIBDIR}/pkgconfig)

if(EARSHOT_COMMAND)
  file(RELATIVE_PATH to_lib ${CMAKE_INSTALL_FULL_BINDIR} ${CMAKE_INSTALL_FULL_LIBDIR})
  if(library_type STREQUAL "SHARED_LIBRARY")
    set_target_properties(earshot_tool PROPERTIES INSTALL_RPATH "$ORIGIN/${to_lib}")
  endif()
  install(TARGETS earshot_tool RUNTIME)
  install(DIRECTORY ${PROJECT_SOURCE_DIR}/configs DESTINATION ${CMAKE_INSTALL_DATADIR}/earshot)
endif()
