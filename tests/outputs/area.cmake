# SPDX-License-Identifier: Apache-2.0
# The files of a run folder as other programs read them.
add_executable(write_sample_run ${CMAKE_CURRENT_LIST_DIR}/write_sample_run.c)
target_include_directories(write_sample_run PRIVATE ${CMAKE_CURRENT_SOURCE_DIR}/unit/reports)
target_link_libraries(write_sample_run PRIVATE reports flags)
foreach(script plain hostile samples)
  add_test(NAME outputs/${script}
    COMMAND /usr/bin/python3 ${CMAKE_CURRENT_LIST_DIR}/${script}.py)
  set_tests_properties(outputs/${script} PROPERTIES TIMEOUT 120
    ENVIRONMENT "WRITE_SAMPLE_RUN=$<TARGET_FILE:write_sample_run>;PYTHONDONTWRITEBYTECODE=1")
endforeach()
