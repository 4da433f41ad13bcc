# SPDX-License-Identifier: Apache-2.0
# Fuzz targets. Ordinary builds replay the corpora; with clang and
# -DDRIVETRIAL_FUZZ=ON there are programs fuzz_* that search (tests/fuzz/search).
option(DRIVETRIAL_FUZZ "Build the libFuzzer programs (clang)" OFF)
if(DRIVETRIAL_FUZZ)
  target_compile_options(flags INTERFACE -fsanitize=fuzzer-no-link,address,undefined
    -fno-sanitize-recover=undefined)
  target_link_options(flags INTERFACE -fsanitize=address,undefined)
endif()

set(fuzz_houses yaml:yaml rig:rigs suite:suites pdu:links tcp:links rtu:links served:rigs
  recording:reports)
foreach(pair ${fuzz_houses})
  string(REPLACE ":" ";" words ${pair})
  list(GET words 0 target)
  list(GET words 1 house)
  set(sources ${CMAKE_CURRENT_LIST_DIR}/fuzz_${target}.c ${CMAKE_CURRENT_LIST_DIR}/fuzz.c)
  set(programs replay_${target})
  add_executable(replay_${target} ${sources} ${CMAKE_CURRENT_LIST_DIR}/replay.c)
  if(DRIVETRIAL_FUZZ)
    add_executable(fuzz_${target} ${sources})
    target_link_options(fuzz_${target} PRIVATE -fsanitize=fuzzer)
    list(APPEND programs fuzz_${target})
  endif()
  foreach(program ${programs})
    target_include_directories(${program} PRIVATE ${CMAKE_CURRENT_LIST_DIR})
    target_link_libraries(${program} PRIVATE ${house} rigs flags)
    target_compile_definitions(${program} PRIVATE SOURCE_DIR="${CMAKE_SOURCE_DIR}")
  endforeach()
  add_test(NAME fuzz/${target}
    COMMAND replay_${target} ${CMAKE_CURRENT_LIST_DIR}/corpora/${target})
  set_tests_properties(fuzz/${target} PROPERTIES TIMEOUT 120)
endforeach()

add_test(NAME fuzz/hostile_files COMMAND /usr/bin/python3 ${CMAKE_CURRENT_LIST_DIR}/hostile_files.py)
set_tests_properties(fuzz/hostile_files PROPERTIES TIMEOUT 300
  ENVIRONMENT "DRIVETRIAL=$<TARGET_FILE:drivetrial>;PYTHONDONTWRITEBYTECODE=1")
