# SPDX-License-Identifier: Apache-2.0
# The benchmark of the modelled bench: built with the rest, run by hand.
add_executable(bench_model ${CMAKE_CURRENT_LIST_DIR}/bench_model.c)
target_link_libraries(bench_model PRIVATE model flags)
