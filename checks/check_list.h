/* SPDX-License-Identifier: Apache-2.0 */
/*
 * One row a kind of check: the file checks/NAME.c ends with the descriptor
 * `const struct check_kind check_NAME`. Included by check_table.c with
 * CHECK(name) defined. To add a check: one file, one row, one test.
 */
CHECK(step_response)
CHECK(load_step)
CHECK(tracking)
CHECK(torque_angle)
CHECK(alignment)
CHECK(fault_reaction)
CHECK(silence_reaction)
CHECK(refusal)
CHECK(stays_within)
CHECK(same_sign)
CHECK(agreement)
CHECK(encoder)
CHECK(modulation)
