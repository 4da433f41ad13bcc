# SPDX-License-Identifier: Apache-2.0
# Runs over a wire that goes wrong; the long form is tests/wire/campaign.py [RUNS] [SEED] [JOBS].
foreach(script "campaign.py short" "first_replies.py")
  separate_arguments(words UNIX_COMMAND "${script}")
  list(POP_FRONT words file)
  get_filename_component(name ${file} NAME_WE)
  add_test(NAME wire/${name}
    COMMAND /usr/bin/python3 ${CMAKE_CURRENT_LIST_DIR}/${file} ${words})
  set_tests_properties(wire/${name} PROPERTIES TIMEOUT 300 LABELS "threads"
    ENVIRONMENT "DRIVETRIAL=$<TARGET_FILE:drivetrial>;PYTHONDONTWRITEBYTECODE=1")
endforeach()
