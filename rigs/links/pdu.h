/* SPDX-License-Identifier: Apache-2.0 */
#ifndef DRIVETRIAL_PDU_H
#define DRIVETRIAL_PDU_H
/*
 * Requests to protocol data units and replies back (Modbus Application
 * Protocol V1.1b3), for every backend: what differs between them is only the
 * frame around the unit. Pure.
 */
#include <stdbool.h>

#include "link.h"

/*
 * Writes the PDU of a request into pdu[LINK_PDU_MOST] and returns its length.
 * Errors: -1 and ERR_STATE for addresses and counts that the protocol does not
 * have; nothing is ever cut to 16 bits silently.
 */
int pdu_build(const struct link_request *request, uint8_t *pdu, struct err *reterr);

/*
 * Fills status, exception, count, words, text, pdu and message of a cleared reply.
 * Anything that is not exactly the answer to this request (another function,
 * length, echoed address or value) is LINK_GARBLED.
 */
void pdu_parse(const struct link_request *request, const uint8_t *pdu, size_t length,
               struct link_reply *ret_reply);

/*
 * Length of the reply PDU whose first bytes are given: 0 where more bytes are
 * needed to say, -1 where nothing says (an unknown function).
 */
int pdu_reply_length(const uint8_t *pdu, size_t known);

/* CRC-16 of Modbus over Serial Line V1.02; its low byte goes out first. */
uint16_t pdu_crc(const uint8_t *bytes, size_t length);

/* Empties a reply: nothing of the reply before must show through. */
void pdu_reply_clear(struct link_reply *ret_reply);

/* Sets status and message. Returns the status. */
enum link_status reply_set(struct link_reply *reply, enum link_status status, const char *format,
                           ...) __attribute__((format(printf, 3, 4)));

#endif
