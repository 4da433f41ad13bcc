# SPDX-License-Identifier: Apache-2.0
# Reports as a browser and other programs from npm read them. Skipped where
# node, npm, Chromium or the npm registry cannot be had. The packages go into
# the build folder.
foreach(script report compare readers)
  add_test(NAME browser/${script} COMMAND ${CMAKE_CURRENT_LIST_DIR}/run ${script}.mjs)
  set_tests_properties(browser/${script} PROPERTIES TIMEOUT 600 SKIP_RETURN_CODE 77 LABELS slow
    RUN_SERIAL TRUE
    ENVIRONMENT "DRIVETRIAL=$<TARGET_FILE:drivetrial>;WRITE_SAMPLE_RUN=$<TARGET_FILE:write_sample_run>;SOURCE=${CMAKE_SOURCE_DIR};MODULES=${CMAKE_BINARY_DIR}/browser-modules")
endforeach()
