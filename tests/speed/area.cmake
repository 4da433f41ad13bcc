# SPDX-License-Identifier: Apache-2.0
# The benchmark of sampling: built with the rest, run by hand (tests/speed/speed);
# CTest runs its short form only to see that it works, and judges no number.
add_executable(speed_server ${CMAKE_CURRENT_LIST_DIR}/speed_server.c)
target_link_libraries(speed_server PRIVATE flags)
add_executable(bare_loop ${CMAKE_CURRENT_LIST_DIR}/bare_loop.c)
target_link_libraries(bare_loop PRIVATE flags PkgConfig::MODBUS)
add_test(NAME speed/short COMMAND /usr/bin/python3 ${CMAKE_CURRENT_LIST_DIR}/speed --short)
set_tests_properties(speed/short PROPERTIES TIMEOUT 300 RUN_SERIAL ON
  ENVIRONMENT "DRIVETRIAL=$<TARGET_FILE:drivetrial>;PYTHONDONTWRITEBYTECODE=1")
