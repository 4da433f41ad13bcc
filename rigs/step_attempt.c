/* SPDX-License-Identifier: Apache-2.0 */
/*
 * Attempts: requests that a device must refuse. They are the one way past the
 * limits of the rig, so only what `attempts:` of the rig lists is taken, and a
 * write still goes to a channel that the rig knows, with a value that its
 * coding holds. Writes to arbitrary addresses were rejected: where the device
 * accepts one, nobody knows what it did.
 */
#include <stdio.h>
#include <string.h>

#include "step_kind.h"

/* Names and codes of the Modbus Application Protocol V1.1b3, section 7. */
static const char *const EXCEPTION_NAMES[] = {
    "any",
    "illegal_function",
    "illegal_data_address",
    "illegal_data_value",
    "server_device_failure",
    "acknowledge",
    "server_device_busy",
    "memory_parity_error",
    "gateway_path_unavailable",
    "gateway_target_device_failed_to_respond",
    NULL,
};
static const int EXCEPTION_CODES[] = {0, 1, 2, 3, 4, 5, 6, 8, 10, 11};
_Static_assert(FIELD_COUNT(EXCEPTION_CODES) + 1 == FIELD_COUNT(EXCEPTION_NAMES), "one name a code");

static const struct {
	const char *key;
	enum link_function function;
	int most; /* values in one request */
} READS[] = {
    {"read_coil", LINK_READ_COILS, LINK_BITS_MOST},
    {"read_discrete_input", LINK_READ_DISCRETE_INPUTS, LINK_BITS_MOST},
    {"read_holding_register", LINK_READ_HOLDING_REGISTERS, LINK_REGISTERS_MOST},
    {"read_input_register", LINK_READ_INPUT_REGISTERS, LINK_REGISTERS_MOST},
};

struct fields {
	const char *name;
	int expect; /* row of EXCEPTION_NAMES */
	int64_t count;
};

/* clang-format off */
static const struct field ROWS[] = {
	{.key = "name", .kind = FIELD_NAME, .offset = offsetof(struct fields, name),
	 .text = "name for checks and reports; without it refused-1, refused-2 ..."},
	{.key = "write", .kind = FIELD_OWN, .text = "{CHANNEL: VALUE}: a command, past `between` too"},
	{.key = "device", .kind = FIELD_OWN, .text = "whom a function or read goes to"},
	{.key = "function", .kind = FIELD_OWN, .text = "a function code of which nothing else is sent"},
	{.key = "read_coil", .kind = FIELD_OWN, .text = "address of coils that are read"},
	{.key = "read_discrete_input", .kind = FIELD_OWN, .text = "address of discrete inputs that are read"},
	{.key = "read_holding_register", .kind = FIELD_OWN, .text = "address of holding registers that are read"},
	{.key = "read_input_register", .kind = FIELD_OWN, .text = "address of input registers that are read"},
	{.key = "count", .kind = FIELD_INTEGER, .least = 0, .most = 65535, .fallback = "1",
	 .offset = offsetof(struct fields, count), .text = "how many are read"},
	{.key = "expect", .kind = FIELD_CHOICE, .choices = EXCEPTION_NAMES, .fallback = "any",
	 .offset = offsetof(struct fields, expect), .text = "the Modbus exception that must come"},
};
const struct field_table STEP_ATTEMPT_FIELDS = {"attempt", "a request that must be refused", ROWS,
                                                FIELD_COUNT(ROWS)};
/* clang-format on */

/* attempt_allowed() of plan.h asks the same of a link worker; this one has positions. */
static bool rig_allows(const struct rig *rig, const struct attempt *attempt)
{
	for (size_t i = 0; i < rig->attempt_count; i++) {
		const struct allowed_attempt *allowed = &rig->attempts[i];
		if (attempt->channel >= 0 && allowed->channel == attempt->channel)
			return true;
		if (attempt->channel < 0 && allowed->channel < 0 && allowed->any_function &&
		    allowed->device == attempt->device)
			return true;
	}
	return false;
}

static int load_name(struct step_loader *loader, const struct yaml_node *value, const char *given,
                     struct attempt *ret)
{
	ret->name =
	    given ? given
	          : arena_printf(loader->context->arena, "refused-%zu", loader->attempt_count + 1);
	if (!ret->name)
		return step_no_memory(loader);
	const struct yaml_node *node = yaml_get(value, "name");
	for (size_t i = 0; i < loader->attempt_count; i++)
		if (strcmp(loader->attempts[i], ret->name) == 0)
			faults_add(loader->context->faults, node ? node->at : value->at,
			           "a second attempt is called '%s'", ret->name);
	if (loader->attempt_count == FIELD_COUNT(loader->attempts))
		faults_add(loader->context->faults, value->at, "more than %zu attempts in one test",
		           FIELD_COUNT(loader->attempts));
	else
		loader->attempts[loader->attempt_count++] = ret->name;
	return 0;
}

static bool load_write(struct step_loader *loader, const struct yaml_node *node,
                       struct attempt *ret)
{
	if (!bind_expect(&loader->binder, node, YAML_MAPPING, "what is written"))
		return false;
	if (node->count != 1) {
		faults_add(loader->context->faults, node->at,
		           "an attempt writes one command: {CHANNEL: VALUE}");
		return false;
	}
	struct assignment assign;
	if (!step_assignment(loader, &node->pairs[0], true, &assign))
		return false;
	ret->channel = assign.channel;
	ret->value = assign.value;
	ret->device = loader->context->rig->channels[assign.channel].device;
	return true;
}

/*
 * A bare function code. Codes with which this program reads and writes are
 * refused: cut short they test something else than an unknown function.
 */
static bool load_function(struct step_loader *loader, const struct yaml_node *node,
                          struct attempt *ret)
{
	int64_t function;
	if (!bind_integer(&loader->binder, node, 1, 127, &function))
		return false;
	if ((function >= 1 && function <= 6) || function == 15 || function == 16 || function == 22 ||
	    function == 23) {
		faults_add(loader->context->faults, node->at,
		           "function %d reads or writes: use `write` or one of the `read_...` keys",
		           (int)function);
		return false;
	}
	ret->request = (struct link_request){.function = LINK_RAW, .pdu_length = 1};
	ret->request.pdu[0] = (uint8_t)function;
	return true;
}

/* Counts that no request may have go out raw: refusing them is the device's part. */
static bool load_read(struct step_loader *loader, const struct yaml_node *node, size_t read,
                      int64_t count, struct attempt *ret)
{
	int64_t address;
	if (!bind_integer(&loader->binder, node, 0, 65535, &address))
		return false;
	ret->request = (struct link_request){
	    .function = READS[read].function, .address = (uint16_t)address, .count = (uint16_t)count};
	if (count >= 1 && count <= READS[read].most && address + count <= 65536)
		return true;
	const uint8_t pdu[5] = {(uint8_t)READS[read].function, (uint8_t)(address >> 8),
	                        (uint8_t)(address & 0xFF), (uint8_t)(count >> 8),
	                        (uint8_t)(count & 0xFF)};
	ret->request.function = LINK_RAW;
	ret->request.pdu_length = sizeof pdu;
	memcpy(ret->request.pdu, pdu, sizeof pdu);
	return true;
}

/* Which of write, function and the reads is given: its index in this order; -1 after a fault. */
static int which_request(struct step_loader *loader, const struct yaml_node *value,
                         const struct yaml_node **ret_node)
{
	const char *keys[2 + FIELD_COUNT(READS)] = {"write", "function"};
	for (size_t i = 0; i < FIELD_COUNT(READS); i++)
		keys[2 + i] = READS[i].key;
	int found = -1;
	for (size_t i = 0; i < FIELD_COUNT(keys); i++) {
		const struct yaml_node *node = yaml_get(value, keys[i]);
		if (node && found >= 0) {
			faults_add(loader->context->faults, node->at, "an attempt makes one request, not two");
			return -1;
		}
		if (node) {
			found = (int)i;
			*ret_node = node;
		}
	}
	if (found < 0)
		faults_add(loader->context->faults, value->at,
		           "an attempt needs `write`, `function` or one of the `read_...` keys");
	return found;
}

static bool load_request(struct step_loader *loader, const struct yaml_node *value, int64_t count,
                         struct attempt *ret)
{
	const struct rig *rig = loader->context->rig;
	const struct yaml_node *node = NULL, *device = yaml_get(value, "device");
	int which = which_request(loader, value, &node);
	if (which < 0)
		return false;
	if (which < 2 && yaml_get(value, "count"))
		faults_add(loader->context->faults, yaml_get(value, "count")->at,
		           "`count` belongs to a read");
	if (which == 0) {
		if (device)
			faults_add(loader->context->faults, device->at,
			           "the channel says which device is written to: remove `device`");
		return load_write(loader, node, ret);
	}
	if (!device) {
		faults_add(loader->context->faults, value->at,
		           "the key 'device' is missing in the attempt");
		return false;
	}
	ret->device = step_device(loader, device);
	if (ret->device < 0)
		return false;
	bool good = which == 1 ? load_function(loader, node, ret)
	                       : load_read(loader, node, (size_t)which - 2, count, ret);
	ret->request.unit = rig->devices[ret->device].unit;
	return good;
}

int step_attempt_load(struct step_loader *loader, const struct yaml_node *value, struct step *ret)
{
	struct fields fields = {.count = 1};
	if (loader->passes > 1) {
		/* A check judges one outcome: a second one that is accepted must not hide behind it. */
		faults_add(loader->context->faults, ret->at,
		           "this attempt would be made %d times: attempts cannot stand in a cycle; "
		           "`repeat` of the test makes it once in each",
		           loader->passes);
		return 0;
	}
	if (!bind_mapping(&loader->binder, &STEP_ATTEMPT_FIELDS, value, &fields))
		return 0;
	struct attempt *attempt = &ret->attempt;
	attempt->expected_exception = EXCEPTION_CODES[fields.expect];
	if (load_name(loader, value, fields.name, attempt) < 0)
		return -1;
	const struct rig *rig = loader->context->rig;
	if (!load_request(loader, value, fields.count, attempt) || rig_allows(rig, attempt))
		return 0;
	if (attempt->channel >= 0)
		faults_add(loader->context->faults, value->at,
		           "the rig does not allow this attempt: `attempts` has no {channel: %s}",
		           rig->channels[attempt->channel].info.name);
	else
		faults_add(loader->context->faults, value->at,
		           "the rig does not allow this attempt: `attempts` has no {device: %s, "
		           "functions: any}",
		           rig->devices[attempt->device].name);
	return 0;
}
