# SPDX-License-Identifier: Apache-2.0
# halfturn_embed(TARGET files...): a library with `halfturn::embedded::file(name)`, the text of each file by its
# path below schemas/ (see plugin/embedded.hpp).
function(halfturn_embed target)
  set(out ${CMAKE_CURRENT_BINARY_DIR}/${target}.cpp)
  add_custom_command(
    OUTPUT ${out}
    COMMAND ${CMAKE_COMMAND} -DOUT=${out} "-DFILES=${ARGN}" -DROOT=${CMAKE_SOURCE_DIR}/schemas -P ${CMAKE_SOURCE_DIR}/plugin/embed_files.cmake
    DEPENDS ${ARGN} ${CMAKE_SOURCE_DIR}/plugin/embed_files.cmake
    VERBATIM)
  add_library(${target} STATIC ${out})
  target_link_libraries(${target} PUBLIC halfturn_flags)
endfunction()
