/* SPDX-License-Identifier: Apache-2.0 */
/*
 * The defect catalogue: one row a defect. Included with
 * DEFECT(IDENTIFIER, name, caught_by, text) defined; at most 64 rows. A
 * defect changes the behaviour in one place, found by its identifier
 * DEFECT_...; those that lie in the handling of requests (caught there by name
 * with model_has_defect()) change nothing in here.
 */
/* clang-format off */
/* tuning */
DEFECT(OVERSHOOT, "overshoot", "step_response",
       "the speed loop is too lively: its integral winds up beyond the torque limit")
DEFECT(SLUGGISH, "sluggish", "step_response",
       "the speed loop is slow: a fifteenth of its bandwidth")
DEFECT(INTEGRATOR_MISSING, "integrator-missing", "step_response",
       "the speed loop has no integral part: load leaves a lasting error")
DEFECT(GAIN_SCHEDULED_WRONG, "gain-scheduled-wrong", "step_response",
       "above 40 % of rated speed the speed loop's gain falls to 8 %")
/* angle */
DEFECT(ENCODER_OFFSET, "encoder-offset", "alignment",
       "the encoder offset is wrong by 12 deg electrical; the controller cannot see it")
DEFECT(ENCODER_LINES_WRONG, "encoder-lines-wrong", "step_response",
       "the controller believes 1000 encoder lines for each 1024")
DEFECT(DIRECTION_SWAPPED, "direction-swapped", "bench/direction",
       "two motor phases and the encoder's tracks are swapped: everything turns the other way")
DEFECT(MAGNETISING_CURRENT, "magnetising-current", "torque_angle",
       "the d current is commanded to -30 % of the rated current instead of zero")
DEFECT(MTPA_OFF, "mtpa-off", "torque_angle",
       "a machine with saliency is run with no d current: less torque per ampere")
DEFECT(FIELD_WEAKENING_LATE, "field-weakening-late", "torque_angle",
       "the field is weakened only beyond the voltage limit, when there is nothing left to control")
DEFECT(INDEX_DRIFTING, "index-drifting", "alignment",
       "the angle is not set at the index but shifted by one count each turn")
DEFECT(SINE_ERROR, "sine-error", "stays_within",
       "the believed angle has an error of 10 deg electrical amplitude once per turn")
/* modulation */
DEFECT(PHASE_DUTY_WRONG, "phase-duty-wrong", "modulation",
       "the duty of phase b is 8 % too small")
DEFECT(NULL_STATES_UNEQUAL, "null-states-unequal", "stays_within",
       "only the lower null state is used: the null time is not shared")
/* faults */
DEFECT(FAULT_NOT_LATCHED, "fault-not-latched", "fault_reaction",
       "the fault goes with its cause, without a reset")
DEFECT(WRONG_FAULT_CODE, "wrong-fault-code", "fault_reaction",
       "overcurrent and overvoltage, encoder loss and overtemperature have each other's code")
DEFECT(RESET_WITHOUT_EDGE, "reset-without-edge", "fault_reaction",
       "a reset bit that stands resets a fault: no rising edge is needed")
DEFECT(RESET_WHILE_CAUSE, "reset-while-cause", "fault_reaction",
       "a reset clears the fault although its cause lasts, and the drive runs with it")
DEFECT(RESTARTS_BY_ITSELF, "restarts-by-itself", "fault_reaction",
       "50 ms after the cause has gone the drive runs again: no reset, no new enable")
DEFECT(RESTARTS_ON_RESET, "restarts-on-reset", "stays_within",
       "after a reset the drive runs at once where enable still stands")
DEFECT(TORQUE_OFF_SLOW, "torque-off-slow", "fault_reaction",
       "the fault is shown at once, but the torque is ramped out over 600 ms")
DEFECT(ENCODER_LOSS_MISSED, "encoder-loss-missed", "fault_reaction",
       "the encoder's signal level is not watched")
DEFECT(OVERCURRENT_MISSED, "overcurrent-missed", "fault_reaction",
       "the overcurrent comparator is not read")
DEFECT(OVERVOLTAGE_MISSED, "overvoltage-missed", "fault_reaction",
       "the DC link voltage is not watched")
DEFECT(OVERTEMPERATURE_MISSED, "overtemperature-missed", "fault_reaction",
       "the winding temperature is not watched")
DEFECT(UNDERVOLTAGE_MISSED, "undervoltage-missed", "fault_reaction",
       "a sagging DC link is not watched")
DEFECT(PHASE_LOSS_MISSED, "phase-loss-missed", "fault_reaction",
       "a motor phase that carries no current is not noticed")
DEFECT(TORQUE_OFF_CHANNEL_IGNORED, "torque-off-channel-ignored", "fault_reaction",
       "channel B of safe torque off is not wired through, and nobody compares the channels")
DEFECT(FAULT_LATE, "fault-late", "fault_reaction",
       "every fault is acted upon 150 ms late")
/* communication */
DEFECT(WATCHDOG_MISSING, "watchdog-missing", "bench/watchdog",
       "silence on the link is not watched")
DEFECT(WATCHDOG_LATE, "watchdog-late", "bench/watchdog",
       "the communication watchdog trips after four times its time")
DEFECT(WATCHDOG_REENABLES, "watchdog-reenables", "silence_reaction",
       "when communication returns, the drive clears its watchdog fault and runs again")
DEFECT(OUT_OF_RANGE_ACCEPTED, "out-of-range-accepted", "refusal",
       "a speed command beyond the range is accepted and obeyed")
DEFECT(CLIPS_SILENTLY, "clips-silently", "refusal",
       "a speed command beyond the range is accepted and clipped without an exception")
DEFECT(WRONG_EXCEPTION, "wrong-exception", "refusal",
       "refused requests are answered with the wrong exception code")
DEFECT(WRITES_NEIGHBOUR, "writes-neighbour", "stays_within",
       "a write also reaches the register after it")
DEFECT(FROZEN_IMAGE, "frozen-image", "life",
       "half a second after the first enable the register image stands still, life counter included")
DEFECT(STALE_IMAGE, "stale-image", "fault_reaction",
       "the values in the register image are 90 ms old, while the life counter runs on")
DEFECT(WORD_ORDER_SWAPPED, "word-order-swapped", "stays_within",
       "the controller answers values of two registers with their words exchanged")
DEFECT(TORN, "torn", "stays_within",
       "one of eight answers of the controller joins two registers of different instants")
/* clang-format on */
