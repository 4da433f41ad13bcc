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
foreach(words "long_run --hours 0.01" "disk.py")
  separate_arguments(words UNIX_COMMAND "${words}")
  list(POP_FRONT words file)
  get_filename_component(name ${file} NAME_WE)
  add_test(NAME speed/${name} COMMAND /usr/bin/python3 ${CMAKE_CURRENT_LIST_DIR}/${file} ${words})
  set_tests_properties(speed/${name} PROPERTIES TIMEOUT 300 SKIP_RETURN_CODE 77
    ENVIRONMENT "DRIVETRIAL=$<TARGET_FILE:drivetrial>;PYTHONDONTWRITEBYTECODE=1")
endforeach()
set_tests_properties(speed/short PROPERTIES LABELS slow)
