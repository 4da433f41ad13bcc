# SPDX-License-Identifier: Apache-2.0
# Golden cases: a folder with the input and the exact message, one test a group.
# `cmake --build build --target refresh-goldens` rewrites what they expect.
add_executable(print_faults ${CMAKE_CURRENT_LIST_DIR}/print_faults.c)
target_link_libraries(print_faults PRIVATE suites flags)
set(golden_refresh)
foreach(group yaml rig step suite)
  add_test(NAME golden/${group}
    COMMAND ${CMAKE_CURRENT_LIST_DIR}/run $<TARGET_FILE:print_faults> ${group})
  set_tests_properties(golden/${group} PROPERTIES TIMEOUT 120)
  list(APPEND golden_refresh
    COMMAND ${CMAKE_CURRENT_LIST_DIR}/run --refresh $<TARGET_FILE:print_faults> ${group})
endforeach()
add_custom_target(refresh-goldens ${golden_refresh} DEPENDS print_faults VERBATIM)
