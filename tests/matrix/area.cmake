# SPDX-License-Identifier: Apache-2.0
# The detection matrix in its short form, and that rehearsals are deterministic. By hand:
# `matrix.py 5 200` the long form, `served.py` over real Modbus, `speed.py` the benchmark.
foreach(script "matrix.py 1 3 --brief" "same_seed.py")
  separate_arguments(words UNIX_COMMAND "${script}")
  list(POP_FRONT words file)
  get_filename_component(name ${file} NAME_WE)
  add_test(NAME matrix/${name}
    COMMAND /usr/bin/python3 ${CMAKE_CURRENT_LIST_DIR}/${file} ${words})
  set_tests_properties(matrix/${name} PROPERTIES TIMEOUT 600
    ENVIRONMENT "DRIVETRIAL=$<TARGET_FILE:drivetrial>;PYTHONDONTWRITEBYTECODE=1")
endforeach()
set_tests_properties(matrix/matrix PROPERTIES LABELS slow)
