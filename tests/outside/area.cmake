# SPDX-License-Identifier: Apache-2.0
# Against evaluations that share nothing with the program but the definitions.
add_executable(print_step ${CMAKE_CURRENT_LIST_DIR}/print_step.c)
target_include_directories(print_step PRIVATE support unit/checks)
target_link_libraries(print_step PRIVATE checks flags PkgConfig::CMOCKA)
add_test(NAME outside/differential
  COMMAND /usr/bin/python3 ${CMAKE_CURRENT_LIST_DIR}/differential.py $<TARGET_FILE:print_step>)
set_tests_properties(outside/differential PROPERTIES TIMEOUT 180)

# How fast a long block is judged, beside NumPy: `cmake --build build --target bench-judge`.
add_executable(bench_judge ${CMAKE_CURRENT_LIST_DIR}/bench_judge.c)
target_include_directories(bench_judge PRIVATE support unit/checks)
target_link_libraries(bench_judge PRIVATE checks flags PkgConfig::CMOCKA)
add_custom_target(bench-judge
  COMMAND /usr/bin/python3 ${CMAKE_CURRENT_LIST_DIR}/bench_judge.py $<TARGET_FILE:bench_judge>
  USES_TERMINAL)
