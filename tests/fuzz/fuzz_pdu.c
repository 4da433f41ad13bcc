/* SPDX-License-Identifier: Apache-2.0 */
/*
 * Any request and any bytes as the reply to it. Input: function, address (2),
 * count (2), first word (2), then the reply.
 */
#include <string.h>

#include "fuzz.h"
#include "pdu.h"

static const enum link_function FUNCTIONS[] = {
    LINK_READ_COILS,
    LINK_READ_DISCRETE_INPUTS,
    LINK_READ_HOLDING_REGISTERS,
    LINK_READ_INPUT_REGISTERS,
    LINK_WRITE_COIL,
    LINK_WRITE_REGISTER,
    LINK_WRITE_COILS,
    LINK_WRITE_REGISTERS,
    LINK_MASK_WRITE,
    LINK_IDENTIFY,
    LINK_RAW,
};

static void demand_reply(const struct link_request *request, const struct link_reply *reply)
{
	bool reads =
	    request->function >= LINK_READ_COILS && request->function <= LINK_READ_INPUT_REGISTERS;
	switch (reply->status) {
	case LINK_OK:
		demand(!reads || reply->count == request->count);
		break;
	case LINK_EXCEPTION:
		demand(reply->exception != 0);
		break;
	default:
		demand(reply->status == LINK_GARBLED);
		demand(reply->message[0] != '\0' && memchr(reply->message, '\0', sizeof reply->message));
		fuzz_readable(reply->message);
	}
	demand(memchr(reply->text, '\0', sizeof reply->text));
}

int LLVMFuzzerTestOneInput(const uint8_t *data, size_t size)
{
	static struct link_reply reply;
	struct link_request request = {.unit = 1};
	uint8_t pdu[LINK_PDU_MOST];
	if (size < 7)
		return 0;
	request.function = FUNCTIONS[data[0] % (sizeof FUNCTIONS / sizeof FUNCTIONS[0])];
	request.address = (uint16_t)(data[1] << 8 | data[2]);
	request.count = (uint16_t)(data[3] << 8 | data[4]);
	request.words[0] = (uint16_t)(data[5] << 8 | data[6]);
	request.pdu[0] = data[5];
	request.pdu_length = data[6];
	data += 7;
	size -= 7;
	int built = pdu_build(&request, pdu, NULL);
	if (built < 0)
		return 0;
	demand(built >= 1 && built <= LINK_PDU_MOST);
	pdu_reply_clear(&reply);
	pdu_parse(&request, data, size, &reply);
	demand_reply(&request, &reply);
	/* The length that a reply says of itself doesn't change once it is known. */
	int said = 0;
	for (size_t known = 0; known <= size && known <= LINK_PDU_MOST; known++) {
		int length = pdu_reply_length(data, known);
		demand(length >= -1 && length <= 2 + 255);
		demand(said == 0 || said == length);
		said = length;
	}
	return 0;
}
