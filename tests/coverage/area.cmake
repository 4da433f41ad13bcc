# SPDX-License-Identifier: Apache-2.0
# Whether intervals hold the truth. The short form is an ordinary test; the long
# form, with the table, is `cmake --build build --target coverage-campaign`.
add_executable(coverage_campaign ${CMAKE_CURRENT_LIST_DIR}/campaign.c
  ${CMAKE_CURRENT_LIST_DIR}/generators.c)
target_include_directories(coverage_campaign PRIVATE support unit/checks)
target_link_libraries(coverage_campaign PRIVATE checks flags PkgConfig::CMOCKA)
add_test(NAME coverage/short COMMAND coverage_campaign 400)
set_tests_properties(coverage/short PROPERTIES TIMEOUT 120)
add_custom_target(coverage-campaign COMMAND coverage_campaign 20000 USES_TERMINAL)
