# SPDX-License-Identifier: Apache-2.0
# An independent implementation on the other side of the wire (python3-pymodbus
# with python3-serial and python3-serial-asyncio); 77: it is not installed.
add_executable(peer_client ${CMAKE_CURRENT_SOURCE_DIR}/peers/peer_client.c)
target_include_directories(peer_client PRIVATE support)
target_link_libraries(peer_client PRIVATE rigs flags PkgConfig::CMOCKA)
target_compile_definitions(peer_client PRIVATE SOURCE_DIR="${CMAKE_SOURCE_DIR}")
foreach(kind tcp rtu)
  add_test(NAME peers/server_${kind} COMMAND /usr/bin/python3
    ${CMAKE_CURRENT_SOURCE_DIR}/peers/server_peer.py $<TARGET_FILE:peer_client> ${kind})
  add_test(NAME peers/client_${kind} COMMAND /usr/bin/python3
    ${CMAKE_CURRENT_SOURCE_DIR}/peers/client_peer.py $<TARGET_FILE:drivetrial> ${kind})
  set_tests_properties(peers/server_${kind} peers/client_${kind} PROPERTIES
    SKIP_RETURN_CODE 77 TIMEOUT 120)
endforeach()
