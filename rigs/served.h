/* SPDX-License-Identifier: Apache-2.0 */
#ifndef DRIVETRIAL_SERVED_H
#define DRIVETRIAL_SERVED_H
/*
 * The register map of a rig file over the modelled bench: what a PDU to a
 * unit of a link is answered. Used by `serve` (behind sockets and ptys) and by
 * the modelled link of `rehearse`, so that both answer alike.
 *
 * Not thread-safe; the caller moves the model's time.
 */
#include "model.h"
#include "rig.h"

struct served;

/*
 * Builds the model from the rig's machine and `model:` sections and binds
 * `serves:`. A channel of the rig that the model section does not serve is
 * named in a fault (never silently served as zero), unknown signals and
 * parameters too. defects: bits of model_defects().
 */
int served_new(const struct rig *rig, uint64_t seed, uint64_t defects, struct faults *faults,
               struct served **ret_served, struct err *reterr);
void served_release(struct served *served);
struct model *served_model(struct served *served);

/*
 * Answers one PDU to a unit on a link at the model's present time. reply:
 * LINK_PDU_MOST bytes. Returns the length of the reply; 0: no answer (unit
 * unknown on a serial line). On TCP an unknown unit gives exception 0x0B.
 */
size_t served_answer(struct served *served, int link, uint8_t unit, const uint8_t *pdu,
                     size_t length, uint8_t *ret_reply);

#endif
