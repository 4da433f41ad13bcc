/* SPDX-License-Identifier: Apache-2.0 */
#ifndef DRIVETRIAL_TIMING_H
#define DRIVETRIAL_TIMING_H
/*
 * How long a transaction takes. One function serves read planning, `plan` and
 * the modelled link. It lies beside the link backends, since the modelled one
 * needs it and may not look up into rigs/.
 *
 * RTU (Modbus over Serial Line V1.02, section 2.5.1.1): 11 bits a character
 * (start, 8 data, parity or second stop, stop), t3.5 between frames; above
 * 19200 baud t1.5 = 750 us and t3.5 = 1.750 ms are fixed.
 * TCP: a turnaround of device and stacks, plus a share for each register.
 * Pure.
 */
#include <stdbool.h>
#include <stdint.h>

struct timing {
	bool serial;
	int baud;
	int bits_per_character; /* RTU: 11; 10 where the line says 8N1 */
	int64_t turnaround_ns;  /* of the device: request complete to reply begun */
	int64_t jitter_ns;      /* largest extra of the turnaround, drawn by the modelled link */
	int64_t per_register_ns;
	int64_t minimum_pause_ns; /* that the device wants between its transactions */
};

/* Defaults where the rig says nothing: TCP 120 us, RTU 1 ms turnaround. */
struct timing timing_tcp(void);
struct timing timing_rtu(int baud, int bits_per_character);

int64_t timing_t35_ns(const struct timing *timing);
/* Bytes of the PDUs of a transaction of `count` registers or bits; function as in link.h. */
int timing_request_bytes(int function, int count);
int timing_reply_bytes(int function, int count);
/* From the first bit of the request to the device having it whole. */
int64_t timing_request_ns(const struct timing *timing, int function, int count);
/* From the end of the request to the last bit of the reply, without jitter. */
int64_t timing_reply_ns(const struct timing *timing, int function, int count);
/* The whole transaction with the pause that must follow it. */
int64_t timing_transaction_ns(const struct timing *timing, int function, int count);

#endif
