/* SPDX-License-Identifier: Apache-2.0 */
/*
 * Registers and bits of one device, made from the model's signals at the time
 * of the request. Each area keeps an image of its used range, refreshed where
 * a request reads, so that fields and bits of one register join.
 *
 * Registers inside the used range that no channel describes read as 0 where
 * the device allows gaps; outside the range, and where gaps are forbidden, they
 * do not exist. A write must meet whole values, and every register of it must
 * belong to one. All values of a request are checked before the first is
 * taken, as the standard's flow charts do.
 */
#include "served_inner.h"

#include <math.h>
#include <string.h>

#include "link.h"

static bool is_bit_place(enum place place)
{
	return place == PLACE_COIL || place == PLACE_DISCRETE_INPUT;
}

/* The words of a text, padded with NUL. */
static void put_text(const struct codec *codec, const char *text, uint16_t *words)
{
	size_t length = strlen(text), at = 0;
	for (int i = 0; i < codec->text_registers; i++) {
		unsigned high = at < length ? (unsigned char)text[at++] : 0;
		unsigned low = at < length ? (unsigned char)text[at++] : 0;
		words[i] = (uint16_t)(codec->low_byte_first ? low << 8 | high : high << 8 | low);
	}
}

enum { TORN_ONE_OF = 8 };

/*
 * The defect torn: one answer of eight with a value of two registers has the
 * high word of the answer before, as where a device writes a value while
 * another part of it is copying it.
 */
static void tear(struct served_device *device, struct served_entry *entry,
                 const struct codec *codec, uint16_t *words)
{
	uint16_t *high = &words[codec->low_word_first ? 1 : 0];
	uint16_t now = *high;
	if (++device->pairs_read % TORN_ONE_OF == 0)
		*high = entry->shown;
	entry->shown = now;
}

/* Puts the present value of an entry into the image. False: it has none. */
static bool refresh(struct served *served, struct served_device *device, struct served_area *area,
                    enum place place, struct served_entry *entry)
{
	uint16_t *words = area->image + (entry->first - area->first);
	struct codec codec = entry->channel->codec;

	if (codec.type == CODEC_TEXT) {
		put_text(&codec, model_read_text(served->model, entry->signal), words);
		return true;
	}
	double value = model_read(served->model, entry->signal) / entry->channel->info.unit->scale;
	if (is_bit_place(place)) {
		words[0] = value != 0.0;
		return !isnan(value);
	}
	if (device->swaps_words && codec_registers(&codec) == 2)
		codec.low_word_first = !codec.low_word_first;
	if (codec.type == CODEC_BIT)
		value = value != 0.0;
	/* A device answers the end of its range where a value lies beyond. */
	double least, most;
	codec_range(&codec, &least, &most);
	if (value < least)
		value = least;
	if (value > most)
		value = most;
	if (codec_encode(&codec, value, words, NULL) != 0)
		return false;
	if (device->tears && codec_registers(&codec) == 2)
		tear(device, entry, &codec, words);
	return true;
}

static bool overlaps(const struct served_entry *entry, int first, int end)
{
	return entry->first < end && entry->end > first;
}

/* Refreshes the image of [first, end), which lies in the used range. */
static bool refresh_range(struct served *served, struct served_device *device, enum place place,
                          int first, int end)
{
	struct served_area *area = &device->areas[place];
	for (size_t i = 0; i < area->count; i++)
		if (overlaps(&area->entries[i], first, end) &&
		    !refresh(served, device, area, place, &area->entries[i]))
			return false;
	return true;
}

int served_read(struct served *served, struct served_device *device, enum place place,
                unsigned address, unsigned count, uint16_t *words)
{
	struct served_area *area = &device->areas[place];
	const int first = (int)address, end = (int)(address + count);

	if (first < area->first || end > area->end)
		return MODEL_BAD_ADDRESS;
	for (int at = first; !device->device->gaps_allowed && at < end; at++)
		if (!area->described[at - area->first])
			return MODEL_BAD_ADDRESS;
	if (!refresh_range(served, device, place, first, end))
		return MODEL_DEVICE_FAILURE;
	memcpy(words, area->image + (first - area->first), count * sizeof *words);
	return 0;
}

/* The value that a written entry would get, in SI. */
static double written_value(const struct served_device *device, const struct served_entry *entry,
                            enum place place, const uint16_t *words)
{
	struct codec codec = entry->channel->codec;
	if (is_bit_place(place))
		return words[0] != 0;
	if (device->swaps_words && codec_registers(&codec) == 2)
		codec.low_word_first = !codec.low_word_first;
	return codec_decode(&codec, words) * entry->channel->info.unit->scale;
}

static int verify_write(const struct served *served, const struct served_device *device,
                        enum place place, int first, int end, const uint16_t *words)
{
	const struct served_area *area = &device->areas[place];

	if (first < area->first || end > area->end)
		return MODEL_BAD_ADDRESS;
	for (int at = first; at < end; at++)
		if (!area->described[at - area->first])
			return MODEL_BAD_ADDRESS;
	for (size_t i = 0; i < area->count; i++) {
		const struct served_entry *entry = &area->entries[i];
		if (!overlaps(entry, first, end))
			continue;
		if (entry->first < first || entry->end > end)
			return MODEL_BAD_ADDRESS; /* half of a value */
		double value = written_value(device, entry, place, words + (entry->first - first));
		int answer = (int)model_write_check(served->model, entry->signal, value);
		if (answer != MODEL_ACCEPTED)
			return answer;
	}
	return 0;
}

/* The defect writes-neighbour: the last word also lands in the register after it. */
static void write_neighbour(struct served *served, const struct served_device *device,
                            enum place place, int end, uint16_t word)
{
	const struct served_area *area = &device->areas[place];
	for (size_t i = 0; i < area->count; i++) {
		const struct served_entry *entry = &area->entries[i];
		if (entry->first == end && entry->end == end + 1)
			(void)model_write(served->model, entry->signal,
			                  written_value(device, entry, place, &word));
	}
}

int served_write(struct served *served, struct served_device *device, enum place place,
                 unsigned address, unsigned count, const uint16_t *words)
{
	struct served_area *area = &device->areas[place];
	const int first = (int)address, end = (int)(address + count);
	int answer = verify_write(served, device, place, first, end, words);

	for (size_t i = 0; answer == 0 && i < area->count; i++) {
		const struct served_entry *entry = &area->entries[i];
		if (overlaps(entry, first, end))
			answer = (int)model_write(
			    served->model, entry->signal,
			    written_value(device, entry, place, words + (entry->first - first)));
	}
	if (answer == 0 && device->writes_neighbour)
		write_neighbour(served, device, place, end, words[count - 1]);
	return answer;
}

int served_object(struct served *served, const struct served_device *device, unsigned object,
                  char *text)
{
	const struct served_area *area = &device->areas[PLACE_IDENTIFICATION];
	const char *found = NULL;
	for (size_t i = 0; i < area->count; i++)
		if (area->entries[i].first == (int)object)
			found = model_read_text(served->model, area->entries[i].signal);
	if (!found && object == 0)
		found = "modelled bench (invented)";
	if (!found && object == 1)
		found = device->device->name;
	if (!found && object == 2) /* the version of the device under test, of others of the model */
		found = device->device->under_test
		            ? model_read_text(served->model, model_signal_find("controller.firmware", 19))
		            : "1.0";
	if (!found)
		return -1;
	size_t length = strnlen(found, SERVED_OBJECT_BYTES_MOST);
	memcpy(text, found, length);
	text[length] = '\0';
	return (int)length;
}
