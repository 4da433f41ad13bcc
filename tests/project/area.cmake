# SPDX-License-Identifier: Apache-2.0
# What the project says of itself: arrows between folders, headers, documents.
add_test(NAME project/structure COMMAND /usr/bin/python3 ${CMAKE_CURRENT_LIST_DIR}/structure.py)
add_test(NAME project/headers
  COMMAND sh ${CMAKE_CURRENT_LIST_DIR}/headers.sh ${CMAKE_SOURCE_DIR} ${CMAKE_C_COMPILER})
add_test(NAME project/documents COMMAND /usr/bin/python3 ${CMAKE_CURRENT_LIST_DIR}/documents.py)
set_tests_properties(project/structure project/headers project/documents PROPERTIES TIMEOUT 60
  ENVIRONMENT "DRIVETRIAL=$<TARGET_FILE:drivetrial>;PYTHONDONTWRITEBYTECODE=1")
