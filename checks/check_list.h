/* SPDX-License-Identifier: Apache-2.0 */
/*
 * One row a kind of check. Included with CHECK(name) defined; CMake reads it
 * too and adds checks/NAME.c. To add a check: one file, one row, one test.
 */
CHECK(step_response)
CHECK(torque_angle)
CHECK(alignment)
CHECK(fault_reaction)
CHECK(silence_reaction)
CHECK(refusal)
CHECK(stays_within)
CHECK(same_sign)
