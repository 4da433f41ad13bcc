/* SPDX-License-Identifier: Apache-2.0 */
/*
 * Who the drive is, before and after the run: identities and parameters, read
 * with plain requests while no worker uses the links. A drive that is not the
 * one that suite and rig name never sees a command; one that has become
 * another in the meantime makes the run worthless.
 */
#include <stdio.h>
#include <string.h>

#include "session.h"

static void exchange(struct session *session, struct link *link, struct link_reply *reply)
{
	int64_t now = clock_now(&session->clock), due;
	while ((due = link_end(link, now, reply)) > now) {
		if (session->options->rehearse)
			session->virtual_clock.now_ns = due + session->origin_ns;
		now = session->options->rehearse ? due : clock_now(&session->clock);
	}
}

/*
 * One read, waited for; before the workers start. It may be repeated without
 * harm, so that one lost reply does not cost a night's run.
 */
static int transact(struct session *session, struct link *link, const struct link_request *request,
                    struct link_reply *reply, struct err *err)
{
	for (int times = 0; times < 4; times++) {
		if (link_begin(link, request, clock_now(&session->clock), err) < 0)
			return -1;
		exchange(session, link, reply);
		if (reply->status == LINK_OK)
			return 0;
	}
	if (reply->status == LINK_EXCEPTION)
		return err_set(err, ERR_LINK, "exception %d (%s)", reply->exception,
		               modbus_exception_name(reply->exception));
	return err_set(err, ERR_LINK, "%s", reply->message[0] ? reply->message : "no reply");
}

static const enum link_function READ_FUNCTIONS[] = {
    [PLACE_COIL] = LINK_READ_COILS,
    [PLACE_DISCRETE_INPUT] = LINK_READ_DISCRETE_INPUTS,
    [PLACE_INPUT_REGISTER] = LINK_READ_INPUT_REGISTERS,
    [PLACE_HOLDING_REGISTER] = LINK_READ_HOLDING_REGISTERS,
};

static int read_identity(struct session *session, const struct rig_device *device, int channel,
                         struct text *text, struct err *err)
{
	const struct rig_channel *rig_channel = &session->rig->channels[channel];
	struct link_request request = {.unit = device->unit, .count = 1};
	struct link_reply *reply = arena_alloc(&session->arena, sizeof *reply);
	if (!reply)
		return err_set(err, ERR_NOMEM, "no memory for a reply");
	request.address = (uint16_t)rig_channel->address;
	if (rig_channel->place == PLACE_IDENTIFICATION) {
		request.function = LINK_IDENTIFY;
	} else {
		request.function = READ_FUNCTIONS[rig_channel->place];
		request.count = (uint16_t)(rig_channel->place <= PLACE_DISCRETE_INPUT
		                               ? 1
		                               : codec_registers(&rig_channel->codec));
	}
	if (transact(session, session->links[device->link], &request, reply, err) < 0)
		return -1;
	char raw[512];
	if (rig_channel->place == PLACE_IDENTIFICATION)
		(void)snprintf(raw, sizeof raw, "%s", reply->text);
	else if (rig_channel->codec.type == CODEC_TEXT)
		codec_decode_text(&rig_channel->codec, reply->words, raw, sizeof raw);
	else
		(void)snprintf(raw, sizeof raw, "%.10g", codec_decode(&rig_channel->codec, reply->words));
	text_add_clean(text, raw, strlen(raw));
	return 0;
}

/* Reads every identity of the rig into `identities`; *ret_count of them. */
static int read_identities(struct session *session, struct identity_read *identities,
                           size_t *ret_count, struct err *err)
{
	const struct rig *rig = session->rig;
	*ret_count = 0;
	for (size_t d = 0; d < rig->device_count; d++) {
		const struct rig_device *device = &rig->devices[d];
		for (size_t i = 0; i < device->identity_count; i++) {
			struct text text;
			struct err cause = {0};
			text_init(&text, 1024);
			int result = read_identity(session, device, device->identity[i].channel, &text, &cause);
			const char *copy = arena_strdup(&session->arena, text_string(&text));
			text_release(&text);
			if (result < 0 || !copy)
				return err_set(err, ERR_LINK, "cannot read the identity of %s (%s): %s",
				               device->name, rig->links[device->link].name, cause.message);
			identities[(*ret_count)++] =
			    (struct identity_read){device->name, device->identity[i].key, copy};
		}
	}
	return 0;
}

static struct identity_read *identity_room(struct session *session, struct err *err)
{
	size_t count = 1;
	for (size_t d = 0; d < session->rig->device_count; d++)
		count += session->rig->devices[d].identity_count;
	struct identity_read *room = arena_array(&session->arena, count, sizeof *room);
	if (!room)
		(void)err_set(err, ERR_NOMEM, "no memory for the identities");
	return room;
}

static int read_value(struct session *session, int channel, double *ret_value, struct err *err)
{
	const struct rig_channel *read = &session->rig->channels[channel];
	const struct rig_device *device = &session->rig->devices[read->device];
	struct link_reply *reply = &session->reply;
	bool bits = read->place <= PLACE_DISCRETE_INPUT;
	struct link_request request = {.unit = device->unit,
	                               .function = READ_FUNCTIONS[read->place],
	                               .address = (uint16_t)read->address,
	                               .count = (uint16_t)(bits ? 1 : codec_registers(&read->codec))};
	if (transact(session, session->links[device->link], &request, reply, err) < 0)
		return -1;
	*ret_value = bits ? reply->words[0] : codec_decode(&read->codec, reply->words);
	return 0;
}

/*
 * Compares the drive's parameters with the rig's file. Returns the first that
 * differs, with its value; NULL where none does. Errors: ERR_LINK.
 */
static const struct expected_parameter *parameter_changed(struct session *session,
                                                          double *ret_value, struct err *err)
{
	for (size_t i = 0; i < session->rig->parameter_count; i++) {
		const struct expected_parameter *expected = &session->rig->parameters[i];
		const struct channel_info *info = &session->rig->infos[expected->channel];
		struct err cause = {0};
		if (read_value(session, expected->channel, ret_value, &cause) < 0) {
			(void)err_set(err, ERR_LINK, "cannot read the parameter %s: %s", info->name,
			              cause.message);
			return NULL;
		}
		/* Half a step of the coding, or the digits of a float32. */
		double slack = info->resolution / 2 + 1e-6 * fabs(expected->value);
		if (!(fabs(*ret_value - expected->value) <= slack))
			return expected;
	}
	return NULL;
}

/* A drive with other parameters than the rig's file says refuses the run. */
static int check_parameters(struct session *session, struct err *err)
{
	double value = 0;
	const struct expected_parameter *other = parameter_changed(session, &value, err);
	if (other)
		faults_add(&session->faults, other->at,
		           "%s of the drive is %.9g %s, and this file says %.9g: nothing was commanded",
		           session->rig->infos[other->channel].name, value,
		           session->rig->infos[other->channel].unit->name, other->value);
	return err->code == ERR_NONE ? 0 : -1;
}

/* A different identity refuses the run. */
static void check_identity(struct session *session)
{
	for (size_t s = 0; s < session->suite_count; s++)
		for (size_t e = 0; e < session->suites[s]->expect_count; e++) {
			const struct expectation *expect = &session->suites[s]->expect[e];
			for (size_t i = 0; i < session->facts.identity_count; i++) {
				const struct identity_read *read = &session->facts.identities[i];
				if (strcmp(read->key, expect->key) != 0 || strcmp(read->text, expect->text) == 0)
					continue;
				faults_add(&session->faults, expect->at,
				           "%s of %s is \"%s\", and the suite expects \"%s\": nothing was "
				           "commanded",
				           expect->key, read->device, read->text, expect->text);
			}
		}
}

int session_identify(struct session *session, struct err *err)
{
	session->facts.identities = identity_room(session, err);
	if (!session->facts.identities ||
	    read_identities(session, session->facts.identities, &session->facts.identity_count, err) <
	        0 ||
	    check_parameters(session, err) < 0)
		return -1;
	check_identity(session);
	return 0;
}

/* Both anew over fresh connections; false with a sentence where something is not as it was. */
static bool read_again(struct session *session, char *why, size_t size)
{
	struct err err = {0};
	size_t count = 0;
	double value = 0;
	struct identity_read *again = identity_room(session, &err);
	for (size_t i = 0; i < session->rig->link_count && err.code == ERR_NONE; i++)
		(void)link_open(session->links[i], &err);
	if (err.code == ERR_NONE)
		(void)read_identities(session, again, &count, &err);
	for (size_t i = 0; i < count && err.code == ERR_NONE; i++)
		if (strcmp(again[i].text, session->facts.identities[i].text) != 0) {
			(void)snprintf(
			    why, size, "%s of %s was \"%.60s\" before the run and is \"%.60s\" after it",
			    again[i].key, again[i].device, session->facts.identities[i].text, again[i].text);
			return false;
		}
	const struct expected_parameter *other =
	    err.code == ERR_NONE ? parameter_changed(session, &value, &err) : NULL;
	if (err.code != ERR_NONE)
		(void)snprintf(why, size, "who the drive is could not be read again: %.180s", err.message);
	else if (other)
		(void)snprintf(why, size, "the parameter %s was %.9g before the run and is %.9g after it",
		               session->rig->infos[other->channel].name, other->value, value);
	return err.code == ERR_NONE && !other;
}

bool session_drive_same(struct session *session, char *why, size_t size)
{
	if (session->facts.identity_count == 0 && session->rig->parameter_count == 0)
		return true;
	for (size_t i = 0; i < session->rig->link_count; i++)
		session->links[i] = worker_link(conductor_worker(session->conductor, i));
	bool same = read_again(session, why, size);
	/* The links stay the workers'. */
	memset(session->links, 0, session->rig->link_count * sizeof(struct link *));
	return same;
}
