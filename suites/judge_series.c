/* SPDX-License-Identifier: Apache-2.0 */
/*
 * What the samples are, before anybody asks what they say.
 *
 * A register image that has frozen still answers, so a reply alone is no
 * measurement: a device that names a life counter must be seen to live. The
 * counter is turned into stretches of time without proof of life, and every
 * row of every channel of that device that touches such a stretch is bad,
 * whatever block it was read in. Counting rows instead of time was rejected:
 * the counter may lie in a block that is read at another interval.
 */
#include "judge_series.h"

#include <stdio.h>
#include <string.h>

enum { ROW_HEAD = 16 }; /* two int64 before the values */

/* A stretch of time, ends excluded, in which a device gave no proof of life. */
struct stretch {
	int64_t from_ns, to_ns;
	const char *why;
};

struct life {
	struct stretch *stretches;
	size_t count, room;
};

struct builder {
	const struct rig *rig;
	struct arena *arena;
	struct series *series;
	struct life *lives;   /* one per device */
	unsigned char *state; /* of derived channels: 0 to do, 1 being done, 2 done */
	struct err *reterr;
};

static int out_of_memory(struct err *reterr)
{
	return err_set(reterr, ERR_NOMEM, "memory ran out while judging");
}

static int map_blocks(struct builder *b, const struct recorded_test *recorded)
{
	const struct rig *rig = b->rig;
	for (size_t i = 0; i < rig->channel_count; i++)
		b->series[i] = (struct series){.channel = &rig->infos[i], .block = -1};
	for (size_t i = 0; i < recorded->block_count; i++) {
		const struct recorded_block *block = &recorded->blocks[i];
		for (size_t k = 0; k < block->channel_count; k++) {
			int channel = block->channels[k];
			if (channel < 0 || (size_t)channel >= rig->channel_count)
				return err_set(b->reterr, ERR_STATE,
				               "the recording of %s names a channel that the rig does not have",
				               recorded->name);
			struct series *series = &b->series[channel];
			if (series->rows > 0 || block->rows == 0)
				continue;
			series->rows = block->rows;
			series->row0 = block->row0;
			series->stride = ROW_HEAD + sizeof(double) * block->channel_count;
			series->earliest_at = 0;
			series->latest_at = sizeof(int64_t);
			series->value_at = ROW_HEAD + sizeof(double) * k;
			series->block = (int)i;
		}
	}
	return 0;
}

/* Where there is no room (rows out of order), everything from there on counts as unproven. */
static void life_add(struct life *life, int64_t from_ns, int64_t to_ns, const char *why)
{
	if (life->count < life->room)
		life->stretches[life->count++] = (struct stretch){from_ns, to_ns, why};
	else
		life->stretches[life->count - 1].to_ns = INT64_MAX;
}

/* Every stretch but the last two is longer than life_within, and of two sorts. */
static size_t stretches_most(const struct series *s, int64_t within_ns)
{
	size_t by_rows = 2 * s->rows + 2;
	int64_t span_ns = series_received(s, s->rows - 1) - series_sent(s, 0);
	if (span_ns < 0 || within_ns <= 0)
		return by_rows;
	size_t by_time = 2 * (size_t)(span_ns / within_ns) + 4;
	return by_time < by_rows ? by_time : by_rows;
}

/* Whether a channel has a column, be it without rows. */
static bool has_column(const struct recorded_test *recorded, int channel)
{
	for (size_t i = 0; i < recorded->block_count; i++)
		for (size_t k = 0; k < recorded->blocks[i].channel_count; k++)
			if (recorded->blocks[i].channels[k] == channel)
				return true;
	return false;
}

/*
 * Walks the counter from movement to movement. A movement is seen at the row
 * whose value differs from the last one known; NaN proves nothing. Between two
 * movements the counter surely stood from the first row with a value to the
 * last row with it, and nothing is known in a gap between rows.
 */
static int find_life(struct builder *b, const struct recorded_test *recorded, size_t device)
{
	const struct rig_device *d = &b->rig->devices[device];
	struct life *life = &b->lives[device];
	if (d->life < 0 || !has_column(recorded, d->life))
		return 0;
	const struct series *s = &b->series[d->life];
	life->room = s->rows > 0 ? stretches_most(s, d->life_within_ns) : 1;
	life->stretches = arena_array(b->arena, life->room, sizeof *life->stretches);
	const char *stands =
	    arena_printf(b->arena, "the life counter %s of %s stands", s->channel->name, d->name);
	const char *unseen = arena_printf(
	    b->arena, "the life counter %s of %s was not read for too long", s->channel->name, d->name);
	if (!life->stretches || !stands || !unseen)
		return out_of_memory(b->reterr);
	if (s->rows == 0) {
		life_add(life, INT64_MIN, INT64_MAX, unseen);
		return 0;
	}
	bool known = false, moved = false;
	double value = 0;
	size_t first = 0;
	int64_t proof_ns = INT64_MIN;
	for (size_t row = 0; row < s->rows; row++) {
		double now = series_value(s, row);
		if (row > 0 && series_sent(s, row) - series_received(s, row - 1) > d->life_within_ns)
			life_add(life, series_received(s, row - 1), series_sent(s, row), unseen);
		bool movement = known && !isnan(now) && now != value;
		bool last = row + 1 == s->rows;
		if (movement || last) {
			size_t end = movement ? row - 1 : row;
			int64_t until_ns = movement ? series_sent(s, row) : INT64_MAX;
			bool too_long = series_sent(s, end) - series_received(s, first) > d->life_within_ns;
			if (too_long || (last && !movement && !moved))
				life_add(life, proof_ns, until_ns, stands);
		}
		if (movement) {
			moved = true;
			proof_ns = series_received(s, row);
			first = row;
		}
		if (!isnan(now)) {
			known = true;
			value = now;
		}
	}
	/* Rows of other blocks may go on when the counter is no longer read. */
	int64_t seen_ns = series_received(s, s->rows - 1);
	if (life->count == 0 || life->stretches[life->count - 1].to_ns < INT64_MAX)
		life_add(life, seen_ns + d->life_within_ns, INT64_MAX, unseen);
	return 0;
}

/* Adds the rows of a series that touch a stretch. */
static int add_bad_rows(struct builder *b, struct series *series, const struct life *life)
{
	if (life->count == 0 || series->rows == 0)
		return 0;
	struct bad_rows *bad = arena_array(b->arena, series->bad_count + life->count, sizeof *bad);
	if (!bad)
		return out_of_memory(b->reterr);
	size_t count = series->bad_count;
	if (count > 0)
		memcpy(bad, series->bad, count * sizeof *bad);
	for (size_t i = 0; i < life->count; i++) {
		const struct stretch *stretch = &life->stretches[i];
		size_t first = series->rows, last = 0;
		for (size_t row = 0; row < series->rows; row++) {
			if (series_received(series, row) <= stretch->from_ns ||
			    series_sent(series, row) >= stretch->to_ns)
				continue;
			if (first == series->rows)
				first = row;
			last = row;
		}
		if (first < series->rows)
			bad[count++] = (struct bad_rows){first, last, stretch->why};
	}
	series->bad = bad;
	series->bad_count = count;
	return 0;
}

/* A derived channel is as bad as any input at that time: by the devices of the inputs. */
static int derive_bad_rows(struct builder *b, size_t channel)
{
	const struct rig *rig = b->rig;
	unsigned char *needs = arena_alloc(b->arena, rig->channel_count);
	unsigned char *devices = arena_alloc(b->arena, rig->device_count + 1);
	if (!needs || !devices)
		return out_of_memory(b->reterr);
	rig_channel_needs(rig, (int)channel, needs);
	for (size_t i = 0; i < rig->channel_count; i++)
		if (needs[i] && rig->channels[i].device >= 0)
			devices[rig->channels[i].device] = 1;
	b->series[channel].bad = NULL;
	b->series[channel].bad_count = 0;
	for (size_t i = 0; i < rig->device_count; i++)
		if (devices[i] && add_bad_rows(b, &b->series[channel], &b->lives[i]) < 0)
			return -1;
	return 0;
}

static int derive_channel(struct builder *b, size_t channel)
{
	const struct rig_channel *c = &b->rig->channels[channel];
	if (c->place != PLACE_DERIVED || b->state[channel] == 2)
		return 0;
	if (b->state[channel] == 1)
		return err_set(b->reterr, ERR_STATE, "channel %s is derived from itself", c->info.name);
	b->state[channel] = 1;
	const struct series *inputs[DERIVE_INPUTS_MOST] = {0};
	bool complete = true;
	for (size_t i = 0; i < DERIVE_INPUTS_MOST; i++) {
		int input = c->derivation.inputs[i];
		if (input < 0)
			continue;
		if (derive_channel(b, (size_t)input) < 0)
			return -1;
		inputs[i] = &b->series[input];
		complete = complete && b->series[input].rows > 0;
	}
	if (complete && inputs[0]) {
		if (derive_series(&c->derivation, inputs, &b->rig->infos[channel], &b->rig->machine,
		                  b->arena, &b->series[channel], b->reterr) < 0)
			return -1;
		if (derive_bad_rows(b, channel) < 0)
			return -1;
	}
	b->state[channel] = 2;
	return 0;
}

int judge_series(const struct rig *rig, const struct recorded_test *recorded, struct arena *arena,
                 struct series **ret_series, struct err *reterr)
{
	struct builder b = {.rig = rig, .arena = arena, .reterr = reterr};
	b.series = arena_array(arena, rig->channel_count + 1, sizeof *b.series);
	b.lives = arena_array(arena, rig->device_count + 1, sizeof *b.lives);
	b.state = arena_alloc(arena, rig->channel_count + 1);
	if (!b.series || !b.lives || !b.state)
		return out_of_memory(reterr);
	if (map_blocks(&b, recorded) < 0)
		return -1;
	for (size_t i = 0; i < rig->device_count; i++)
		if (find_life(&b, recorded, i) < 0)
			return -1;
	for (size_t i = 0; i < rig->channel_count; i++)
		if (rig->channels[i].place != PLACE_DERIVED && rig->channels[i].device >= 0 &&
		    add_bad_rows(&b, &b.series[i], &b.lives[rig->channels[i].device]) < 0)
			return -1;
	for (size_t i = 0; i < rig->channel_count; i++)
		if (derive_channel(&b, i) < 0)
			return -1;
	*ret_series = b.series;
	return 0;
}

/* The row from which samples may speak for `begin`, and the last that may for `end`. */
static bool rows_between(const struct series *s, int64_t begin_ns, int64_t end_ns,
                         size_t *ret_first, size_t *ret_last)
{
	size_t first = series_first_at(s, begin_ns);
	size_t last = series_first_at(s, end_ns);
	if (last == s->rows && last > 0)
		last--;
	*ret_first = first;
	*ret_last = last;
	return s->rows > 0 && first < s->rows && last >= first + 2;
}

enum { GAP_INTERVALS = 5, GAP_LEAST_MS = 20 };

/* Longest stretch of time in which the condition may have held, ends included. */
static int64_t longest_held(const struct series *s, const struct condition *condition, size_t first,
                            size_t last, double *ret_least, double *ret_most)
{
	int64_t longest = -1, from_ns = series_sent(s, first);
	bool held = false;
	for (size_t row = first; row <= last; row++) {
		double value = series_value(s, row);
		*ret_least = fmin(*ret_least, value);
		*ret_most = fmax(*ret_most, value);
		bool holds = condition_holds(condition, value);
		held = held || holds;
		if (held) {
			int64_t length = series_received(s, row) - from_ns;
			longest = length > longest ? length : longest;
		}
		if (!holds) {
			held = false;
			from_ns = series_sent(s, row);
		}
	}
	return longest;
}

void judge_await(const struct rig *rig, const struct series *s, const struct condition *condition,
                 int64_t begin_ns, int64_t end_ns, struct await_finding *ret)
{
	*ret = (struct await_finding){0};
	char what[256], waited[40], why[256];
	(void)condition_text(condition, rig, what, sizeof what);
	(void)duration_text(end_ns - begin_ns, waited, sizeof waited);
	size_t first, last;
	if (!rows_between(s, begin_ns, end_ns, &first, &last)) {
		(void)snprintf(ret->reason, sizeof ret->reason,
		               "awaited '%s' for %s, and %s was sampled too rarely in that time to tell "
		               "whether it came true",
		               what, waited, s->channel->name);
		return;
	}
	int64_t span_ns = series_received(s, last) - series_sent(s, first);
	int64_t gap_ns = GAP_INTERVALS * span_ns / (int64_t)(last - first);
	if (gap_ns < GAP_LEAST_MS * NS_PER_MS)
		gap_ns = GAP_LEAST_MS * NS_PER_MS;
	bool late = series_sent(s, first) - begin_ns > gap_ns;
	bool early = end_ns - series_received(s, last) > gap_ns;
	if (late || early)
		(void)snprintf(why, sizeof why, "%s was not sampled at the %s of that time",
		               s->channel->name, late ? "begin" : "end");
	if (late || early || series_fault(s, first, last, gap_ns, why, sizeof why)) {
		(void)snprintf(ret->reason, sizeof ret->reason,
		               "awaited '%s' for %s, and the samples cannot tell whether it came true: %s",
		               what, waited, why);
		return;
	}
	double least = HUGE_VAL, most = -HUGE_VAL;
	int64_t held_ns = longest_held(s, condition, first, last, &least, &most);
	if (held_ns >= 0 && held_ns >= condition->for_ns) {
		(void)snprintf(ret->reason, sizeof ret->reason,
		               "awaited '%s' for %s without success, but the samples do not exclude that "
		               "it came true",
		               what, waited);
		return;
	}
	char a[96], b[96];
	(void)channel_value_text(rig, condition->channel, least, a, sizeof a);
	(void)channel_value_text(rig, condition->channel, most, b, sizeof b);
	ret->proven = true;
	if (least == most)
		(void)snprintf(ret->reason, sizeof ret->reason,
		               "'%s' did not come true within %s: %s was %s in all %zu samples", what,
		               waited, s->channel->name, a, last - first + 1);
	else
		(void)snprintf(ret->reason, sizeof ret->reason,
		               "'%s' did not come true within %s: %s was between %s and %s in %zu samples",
		               what, waited, s->channel->name, a, b, last - first + 1);
}
