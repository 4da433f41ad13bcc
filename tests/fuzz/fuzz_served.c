/* SPDX-License-Identifier: Apache-2.0 */
/*
 * Any requests to the served bench. Input, again and again: link (1), unit
 * (1), length (1), PDU. What is answered has the form of an answer, and what
 * the program's own parser takes of it is no lie about its length.
 */
#include <string.h>

#include "fuzz.h"
#include "link.h"
#include "pdu.h"
#include "served.h"

#define RIG SOURCE_DIR "/rigs/model-spm.yaml"

int LLVMFuzzerTestOneInput(const uint8_t *data, size_t size)
{
	static struct served *served;
	const struct rig *rig = fuzz_rig(RIG);
	uint8_t reply[LINK_PDU_MOST];
	if (!served) {
		struct faults faults = {0};
		struct err err = {0};
		demand(served_new(rig, 1, 0, &faults, &served, &err) == 0 && served);
	}
	while (size >= 4) {
		int link = data[0] % (int)rig->link_count;
		uint8_t unit = data[1];
		size_t length = data[2] < size - 3 ? data[2] : size - 3;
		/* A copy of the exact size: a read past the request is seen. */
		uint8_t *pdu = malloc(length ? length : 1);
		demand(pdu);
		memcpy(pdu, data + 3, length);
		size_t got = served_answer(served, link, unit, pdu, length, reply);
		demand(got <= LINK_PDU_MOST);
		if (got > 0) {
			demand((reply[0] & 0x7F) == (pdu[0] & 0x7F));
			demand(reply[0] == pdu[0] || (got == 2 && reply[1] != 0));
			int said = pdu_reply_length(reply, got);
			demand(said == -1 || (size_t)said == got);
		}
		free(pdu);
		data += 3 + length;
		size -= 3 + length;
	}
	return 0;
}
