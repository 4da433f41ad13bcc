# SPDX-License-Identifier: Apache-2.0
# Whole runs on the modelled bench, rehearsed and served.
foreach(script "defects.py rehearse 1" "ways_out.py 3" "drive.py")
  separate_arguments(words UNIX_COMMAND "${script}")
  list(POP_FRONT words file)
  get_filename_component(name ${file} NAME_WE)
  add_test(NAME bench/${name}
    COMMAND /usr/bin/python3 ${CMAKE_CURRENT_LIST_DIR}/${file} ${words})
  set_tests_properties(bench/${name} PROPERTIES TIMEOUT 400
    ENVIRONMENT "DRIVETRIAL=$<TARGET_FILE:drivetrial>;PYTHONDONTWRITEBYTECODE=1")
endforeach()
set_tests_properties(bench/ways_out PROPERTIES LABELS slow) # over and over in real time
