/* SPDX-License-Identifier: Apache-2.0 */
/*
 * See capture.h. The conductor tells of a test before its first row can
 * exist, so a row of a newer generation means that its event is waiting. Rows
 * that come in after the next test has begun (one transaction at most) are
 * dropped: the stimulus that they would show is over.
 */
#include "capture.h"

#include <math.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

static const int64_t FLUSH_NS = 100 * NS_PER_MS;
static const int64_t HEARTBEAT_NS = 60 * NS_PER_S;

int capture_init(struct capture *capture, struct conductor *conductor,
                 const struct run_folder *folder, struct journal *journal, const struct rig *rig,
                 struct suite *const *suites, size_t suite_count, struct stop *stop,
                 struct err *reterr)
{
	*capture = (struct capture){.conductor = conductor,
	                            .folder = folder,
	                            .journal = journal,
	                            .rig = rig,
	                            .suites = suites,
	                            .stop = stop,
	                            .generation = -1};
	for (size_t s = 0; s < suite_count; s++)
		for (size_t t = 0; t < suites[s]->test_count; t++) {
			int count = conductor_block_count(conductor, (int)s, (int)t);
			if (count > capture->writer_room)
				capture->writer_room = count;
		}
	capture->writers = calloc((size_t)capture->writer_room + 1, sizeof(struct samples_writer *));
	if (!capture->writers)
		return err_set(reterr, ERR_NOMEM, "no memory for the sample files");
	return 0;
}

static void check(struct capture *capture, int result)
{
	if (result == 0 || capture->failed)
		return;
	capture->failed = true;
	if (stop_raise(capture->stop, "the run folder cannot be written: %.200s", capture->err.message))
		conductor_wake(capture->conductor);
}

static void close_writers(struct capture *capture)
{
	for (int i = 0; i < capture->writer_count; i++) {
		if (capture->writers[i])
			check(capture, samples_writer_close(capture->writers[i], &capture->err));
		capture->writers[i] = NULL;
	}
	capture->writer_count = 0;
	capture->generation = -1;
}

/* A line for a person: the time, the event as in the journal, and what it is about. */
static void tell_event(const struct capture *capture, const struct journal_event *event)
{
	struct text text;
	if (event->kind == JOURNAL_BLOCK || event->kind == JOURNAL_HEARTBEAT ||
	    event->kind == JOURNAL_LINK_COUNTS)
		return;
	text_init(&text, 4096);
	text_printf(&text, "%12.6f s  %-13s", (double)event->time_ns * 1e-9,
	            journal_kind_name(event->kind));
	if (event->suite >= 0 && event->test >= 0) {
		const char *name = capture->suites[event->suite]->tests[event->test].name;
		text_puts(&text, "  ");
		text_add_line(&text, name, strlen(name));
	}
	if (event->channel >= 0 && !isnan(event->value)) {
		const struct channel_info *info = &capture->rig->infos[event->channel];
		bool plain = info->unit == unit_one();
		text_printf(&text, "  %s = %.6g%s%s", info->name, event->value, plain ? "" : " ",
		            plain ? "" : info->unit->name);
	}
	if (event->link >= 0)
		text_printf(&text, "  %s", capture->rig->links[event->link].name);
	text_puts(&text, "  ");
	text_add_line(&text, event->name, strlen(event->name));
	text_add_line(&text, event->text, strlen(event->text));
	(void)fprintf(stderr, "%s\n", text_string(&text));
	text_release(&text);
}

static void write_event(struct capture *capture, const struct journal_event *event)
{
	if (capture->verbose)
		tell_event(capture, event);
	if (!capture->failed)
		check(capture, journal_write(capture->journal, event, &capture->err));
}

static void open_writers(struct capture *capture, const struct journal_event *begin)
{
	int generation = conductor_generation(capture->conductor, begin->suite, begin->test);
	int count = conductor_block_count(capture->conductor, begin->suite, begin->test);
	const char *test = capture->suites[begin->suite]->tests[begin->test].name;
	capture->generation = generation;
	for (int i = 0; i < count && !capture->failed; i++) {
		const char *names[LINK_BITS_MOST];
		int suite, index;
		const struct read_block *block =
		    conductor_block(capture->conductor, generation, i, &suite, &index);
		struct journal_event event = *begin;
		event.kind = JOURNAL_BLOCK;
		event.number = i;
		event.device = block->device;
		for (size_t c = 0; c < block->channel_count; c++)
			names[c] = capture->rig->infos[block->channels[c]].name;
		check(capture, samples_writer_new(capture->folder, test, i, names, block->channel_count,
		                                  &capture->writers[i], &capture->err));
		capture->writer_count = i + 1;
		if (capture->failed)
			break;
		(void)snprintf(event.name, sizeof event.name, "%s",
		               samples_writer_name(capture->writers[i]));
		write_event(capture, &event);
	}
}

static void take_row(struct capture *capture, const struct row *row)
{
	if (row->generation != capture->generation || row->block >= capture->writer_count ||
	    !capture->writers[row->block] || capture->failed)
		return;
	capture->rows++;
	check(capture, samples_writer_add(capture->writers[row->block], row->sent_ns, row->received_ns,
	                                  row->values, &capture->err));
}

/* Rows of the present test; stops at the first row of a newer one. */
static void drain_rows(struct capture *capture)
{
	for (size_t i = 0; i < conductor_worker_count(capture->conductor); i++) {
		struct ring *rows = worker_rows(conductor_worker(capture->conductor, i));
		const struct row *row;
		while ((row = ring_front(rows)) && row->generation <= capture->generation) {
			take_row(capture, row);
			ring_pop(rows);
		}
	}
}

static void drain_events(struct capture *capture, struct ring *events)
{
	const struct journal_event *event;
	while ((event = ring_front(events))) {
		if (event->kind == JOURNAL_TEST_BEGIN) {
			drain_rows(capture);
			close_writers(capture);
		}
		write_event(capture, event);
		if (event->kind == JOURNAL_TEST_BEGIN)
			open_writers(capture, event);
		ring_pop(events);
	}
}

void capture_drain(struct capture *capture, int64_t now_ns)
{
	drain_events(capture, conductor_events(capture->conductor));
	for (size_t i = 0; i < conductor_worker_count(capture->conductor); i++)
		drain_events(capture, worker_events(conductor_worker(capture->conductor, i)));
	drain_rows(capture);
	if (now_ns - capture->flushed_ns >= FLUSH_NS) {
		capture->flushed_ns = now_ns;
		capture_flush(capture);
	}
	if (now_ns - capture->heartbeat_ns >= HEARTBEAT_NS) {
		capture->heartbeat_ns = now_ns;
		struct journal_event event = {
		    .kind = JOURNAL_HEARTBEAT,
		    .time_ns = now_ns,
		    .suite = -1,
		    .test = -1,
		    .device = -1,
		    .link = -1,
		    .channel = -1,
		    .value = (double)NAN,
		    .number = (int)(capture->rows > INT32_MAX ? INT32_MAX : capture->rows)};
		write_event(capture, &event);
	}
}

void capture_flush(struct capture *capture)
{
	for (int i = 0; i < capture->writer_count && !capture->failed; i++)
		if (capture->writers[i])
			check(capture, samples_writer_flush(capture->writers[i], &capture->err));
}

void capture_close(struct capture *capture, int64_t now_ns)
{
	capture_drain(capture, now_ns);
	close_writers(capture);
}

void capture_release(struct capture *capture)
{
	if (!capture->writers)
		return;
	close_writers(capture);
	free(capture->writers);
	capture->writers = NULL;
}
