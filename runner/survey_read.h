/* SPDX-License-Identifier: Apache-2.0 */
#ifndef DRIVETRIAL_SURVEY_READ_H
#define DRIVETRIAL_SURVEY_READ_H
/*
 * What a survey learns of a bench, by reads alone: who answers, what stands in
 * each channel, how long transactions take, how often values change.
 *
 * One thread, the real clock, links of session_reach(). Every loop is bounded:
 * a link is read for at most SURVEY_LINK_NS or SURVEY_ROUNDS rounds, and a
 * device that has lost three replies in a row is left alone.
 */
#include "plan.h"
#include "session.h"

enum {
	SURVEY_ROUNDS = 400,
	SURVEY_WORDS_SHOWN = 8,
	SURVEY_OBJECTS = 3, /* basic objects of function 43/14: vendor, product code, revision */
	SURVEY_TEXT = 128,
};
#define SURVEY_LINK_NS (2 * NS_PER_S)

struct survey_channel {
	bool asked; /* false: derived, or its device does not answer */
	enum link_status status;
	int exception;
	char message[160];
	uint16_t words[SURVEY_WORDS_SHOWN]; /* of the last reply */
	int word_count;
	char text[SURVEY_TEXT]; /* text channels, made safe for terminals */
	double value;           /* NaN: none */
	/* Seen while round-trip times were taken. */
	double least, most;
	size_t reads, changes;
	double last;
	int64_t first_change_ns, last_change_ns, gap_most_ns;
};

struct survey_block {
	const struct read_block *read;
	size_t reads;
	int64_t *rtt_ns; /* sorted once the survey is done */
};

struct survey_device {
	bool answers;
	int lost; /* in a row */
	size_t timeouts, requests;
	char cause[192]; /* why it does not answer */
	char objects[SURVEY_OBJECTS][SURVEY_TEXT];
	enum link_status object_status;
	int object_exception;
};

struct survey_link {
	bool open;
	char cause[256];
	int64_t between_ns; /* median from a reply to the next request; -1: not seen */
};

struct survey {
	const struct rig *rig;
	struct link **links;
	struct clock clock;
	struct arena *arena;
	struct link_reply *reply;
	struct survey_link *link;
	struct survey_device *device;
	struct survey_channel *channel;
	struct read_plan plan; /* of the channels that answer */
	struct survey_block *block;
};

/* Errors: ERR_NOMEM. What does not answer is a finding, no error. */
int survey_take(struct survey *survey, struct session *session, struct err *reterr);
/* Reads every block once more; values only. For --watch. */
void survey_again(struct survey *survey);
/* Derived channels, from the values last read. */
double survey_value(const struct survey *survey, int channel);
/* How often a channel changes: the mean time between changes, or 0 where it cannot be said.
 * *ret_faster: it changed at nearly every read, so it may be faster. */
int64_t survey_change_ns(const struct survey *survey, int channel, bool *ret_faster);

#endif
