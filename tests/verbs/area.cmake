# SPDX-License-Identifier: Apache-2.0
# The verbs beside a run: plan, survey, schema, help.
foreach(line "plan_truth.py decisions" "plan_truth.py intervals" "plan_truth.py shipped"
        "schema_check.py" "survey_served.py" "helping.py")
  separate_arguments(words UNIX_COMMAND "${line}")
  list(POP_FRONT words file)
  string(REGEX REPLACE "\\.py" "" name "${line}")
  string(REPLACE " " "_" name "${name}")
  add_test(NAME verbs/${name}
    COMMAND /usr/bin/python3 ${CMAKE_CURRENT_LIST_DIR}/${file} ${words})
  set_tests_properties(verbs/${name} PROPERTIES TIMEOUT 300
    ENVIRONMENT "DRIVETRIAL=$<TARGET_FILE:drivetrial>;PYTHONDONTWRITEBYTECODE=1")
endforeach()
