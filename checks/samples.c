/* SPDX-License-Identifier: Apache-2.0 */
/*
 * Looking at series without changing them. What makes rows no measurement is
 * found here once, in the order in which a reader would name it, so that every
 * check refuses the same data with the same words.
 */
#include "samples.h"

#include <stdio.h>

size_t series_first_at(const struct series *series, int64_t t_ns)
{
	size_t low = 0, high = series->rows;
	while (low < high) {
		size_t middle = low + (high - low) / 2;
		if (series_received(series, middle) < t_ns)
			low = middle + 1;
		else
			high = middle;
	}
	return low;
}

static double ms(int64_t ns)
{
	return (double)ns / 1e6;
}

/* One row by itself, and against the row before it. */
static bool row_fault(const struct series *series, size_t row, size_t first, int64_t gap_most_ns,
                      char *why, size_t size)
{
	const char *name = series->channel->name;
	int64_t sent = series_sent(series, row), received = series_received(series, row);
	if (received < sent) {
		(void)snprintf(why, size, "%s: a reply at %.3f ms is dated before its request", name,
		               ms(received));
		return true;
	}
	if (isnan(series_value(series, row))) {
		(void)snprintf(why, size, "%s has no value at %.3f ms", name, ms(received));
		return true;
	}
	if (row == first)
		return false;
	int64_t sent_before = series_sent(series, row - 1);
	int64_t received_before = series_received(series, row - 1);
	if (sent == sent_before && received == received_before) {
		(void)snprintf(why, size, "%s: the row at %.3f ms stands twice", name, ms(received));
		return true;
	}
	if (sent < sent_before || received < received_before) {
		(void)snprintf(why, size, "%s: rows are out of order at %.3f ms", name, ms(received));
		return true;
	}
	if (gap_most_ns > 0 && received - received_before > gap_most_ns) {
		(void)snprintf(why, size, "%s: no sample from %.3f ms to %.3f ms", name,
		               ms(received_before), ms(received));
		return true;
	}
	return false;
}

bool series_fault(const struct series *series, size_t first, size_t last, int64_t gap_most_ns,
                  char *why, size_t size)
{
	if (series->rows == 0 || last >= series->rows || first > last) {
		(void)snprintf(why, size, "%s has no samples there", series->channel->name);
		return true;
	}
	for (size_t i = 0; i < series->bad_count; i++)
		if (series->bad[i].first <= last && series->bad[i].last >= first) {
			(void)snprintf(
			    why, size, "%s at %.3f ms is no measurement: %s", series->channel->name,
			    ms(series_received(series,
			                       series->bad[i].first > first ? series->bad[i].first : first)),
			    series->bad[i].why);
			return true;
		}
	for (size_t row = first; row <= last; row++)
		if (row_fault(series, row, first, gap_most_ns, why, size))
			return true;
	return false;
}

double series_error_limit(const struct series *series, size_t row)
{
	const struct accuracy *accuracy = &series->channel->accuracy;
	double limit = 0;
	if (accuracy->given)
		limit = accuracy->of_reading * fabs(series_value(series, row)) +
		        accuracy->of_range * accuracy->range + accuracy->absolute;
	if (series->extra)
		limit += series->extra[row];
	return limit;
}

const char *channel_value_name(const struct channel_info *channel, double value)
{
	for (size_t i = 0; i < channel->name_count; i++)
		if (channel->named_values[i] == value)
			return channel->value_names[i];
	return NULL;
}

/* Codes of the Modbus Application Protocol Specification V1.1b3, section 7. */
const char *modbus_exception_name(int code)
{
	static const char *const names[] = {
	    [1] = "illegal function",
	    [2] = "illegal data address",
	    [3] = "illegal data value",
	    [4] = "server device failure",
	    [5] = "acknowledge",
	    [6] = "server device busy",
	    [8] = "memory parity error",
	    [10] = "gateway path unavailable",
	    [11] = "gateway target device failed to respond",
	};
	if (code < 1 || code >= (int)(sizeof names / sizeof names[0]) || !names[code])
		return "unknown exception";
	return names[code];
}
