# SPDX-License-Identifier: Apache-2.0
# What `cmake --install build --prefix /usr` lays down: the program, its service unit, man page and completion.
include(GNUInstallDirs)
set(package ${CMAKE_CURRENT_LIST_DIR})
# The unit names the program by its full path, which the prefix given at installation decides.
install(CODE "
  set(HALFTURN_PROGRAM \"\${CMAKE_INSTALL_PREFIX}/${CMAKE_INSTALL_BINDIR}/halfturn\")
  configure_file(\"${package}/halfturn.service.in\" \"${CMAKE_CURRENT_BINARY_DIR}/halfturn.service\" @ONLY)")
install(TARGETS halfturn RUNTIME DESTINATION ${CMAKE_INSTALL_BINDIR})
install(FILES ${CMAKE_CURRENT_BINARY_DIR}/halfturn.service DESTINATION lib/systemd/system)
install(FILES ${package}/halfturn.1 DESTINATION ${CMAKE_INSTALL_MANDIR}/man1)
install(FILES ${package}/halfturn.bash DESTINATION ${CMAKE_INSTALL_DATADIR}/bash-completion/completions RENAME halfturn)
