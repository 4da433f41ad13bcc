/* SPDX-License-Identifier: Apache-2.0 */
/* Series, what spoils rows, windows, crossings, and the table of checks. */
#include "crossing.h"
#include "recording.h"
#include "window.h"

static int fill(struct recording *rec, size_t rows)
{
	recording_init(rec);
	int channel = recording_channel(rec, "speed", "rpm", EVIDENCE_SELF_REPORTED);
	for (size_t i = 0; i < rows; i++)
		recording_add(rec, channel, MS(10 * (double)i), MS(10 * (double)i + 1), (double)i);
	rec->end_ns = MS(10 * (double)rows);
	return channel;
}

static void a_value_was_true_as_much_earlier_as_device_and_instrument_say(void **state)
{
	(void)state;
	struct recording rec;
	int channel = fill(&rec, 3);
	rec.channels[channel].refresh_ns = MS(2);
	rec.channels[channel].delay_least_ns = MS(0.5);
	rec.channels[channel].delay_most_ns = MS(3);
	assert_int_equal(series_earliest(&rec.series[channel], 1), MS(5));
	assert_int_equal(series_latest(&rec.series[channel], 1), MS(10.5));
	recording_release(&rec);
}

static void rows_are_found_by_time(void **state)
{
	(void)state;
	struct recording rec;
	int channel = fill(&rec, 100);
	const struct series *series = &rec.series[channel];
	assert_int_equal(series_first_at(series, MS(-5)), 0);
	assert_int_equal(series_first_at(series, MS(1)), 0);
	assert_int_equal(series_first_at(series, MS(1) + 1), 1);
	assert_int_equal(series_first_at(series, MS(500)), 50);
	assert_int_equal(series_first_at(series, MS(5000)), 100);
	recording_release(&rec);
}

static void each_fault_of_rows_is_named(void **state)
{
	(void)state;
	char why[200];
	struct recording rec;
	int channel = fill(&rec, 10);
	struct series *series = &rec.series[channel];
	struct recorded_row *rows = rec.rows[channel];
	const struct recorded_row good = rows[5];
	assert_false(series_fault(series, 0, 9, MS(10), why, sizeof why));
	assert_true(series_fault(series, 0, 9, MS(9), why, sizeof why));
	assert_non_null(strstr(why, "no sample from 1.000 ms to 11.000 ms"));
	rows[5].value = (double)NAN;
	assert_true(series_fault(series, 0, 9, 0, why, sizeof why));
	assert_non_null(strstr(why, "no value at 51.000 ms"));
	assert_false(series_fault(series, 0, 4, 0, why, sizeof why));
	rows[5] = good;
	rows[5].received = rows[5].sent - 1;
	assert_true(series_fault(series, 0, 9, 0, why, sizeof why));
	assert_non_null(strstr(why, "before its request"));
	rows[5] = rows[4];
	assert_true(series_fault(series, 0, 9, 0, why, sizeof why));
	assert_non_null(strstr(why, "stands twice"));
	rows[5] = good;
	rows[5].sent = rows[4].sent - 1;
	assert_true(series_fault(series, 0, 9, 0, why, sizeof why));
	assert_non_null(strstr(why, "out of order"));
	rows[5] = good;
	const struct bad_rows bad = {2, 3, "the life counter of controller stands"};
	series->bad = &bad;
	series->bad_count = 1;
	assert_true(series_fault(series, 0, 9, 0, why, sizeof why));
	assert_non_null(strstr(why, "life counter"));
	assert_false(series_fault(series, 4, 9, 0, why, sizeof why));
	assert_true(series_fault(series, 5, 10, 0, why, sizeof why));
	assert_true(series_fault(series, 6, 5, 0, why, sizeof why));
	recording_release(&rec);
}

static void limits_of_error_add_up(void **state)
{
	(void)state;
	struct recording rec;
	int channel = fill(&rec, 3);
	rec.rows[channel][1].value = -200;
	assert_near(series_error_limit(&rec.series[channel], 1), 0, 0, "");
	rec.channels[channel].accuracy = (struct accuracy){
	    .of_reading = 0.002, .of_range = 0.0005, .range = 1000, .absolute = 0.1, .given = true};
	assert_near(series_error_limit(&rec.series[channel], 1), 0.4 + 0.5 + 0.1, 1e-12, "");
	const double extra[3] = {0, 0.25, 0};
	rec.series[channel].extra = extra;
	assert_near(series_error_limit(&rec.series[channel], 1), 1.25, 1e-12, "");
	recording_release(&rec);
}

static void names_of_values_and_exceptions_are_found(void **state)
{
	(void)state;
	static const double values[] = {0, 3};
	static const char *const names[] = {"none", "encoder_loss"};
	const struct channel_info channel = {
	    .named_values = values, .value_names = names, .name_count = 2};
	assert_string_equal(channel_value_name(&channel, 3), "encoder_loss");
	assert_null(channel_value_name(&channel, 1));
	assert_null(channel_value_name(&channel, (double)NAN));
	/* Modbus Application Protocol V1.1b3, section 7. */
	assert_string_equal(modbus_exception_name(2), "illegal data address");
	assert_string_equal(modbus_exception_name(11), "gateway target device failed to respond");
	assert_string_equal(modbus_exception_name(7), "unknown exception");
	assert_string_equal(modbus_exception_name(-1), "unknown exception");
	assert_string_equal(modbus_exception_name(99), "unknown exception");
}

static struct check_input input_of(struct recording *rec)
{
	return (struct check_input){
	    .series = rec->series,
	    .channels = rec->channels,
	    .channel_count = rec->channel_count,
	    .marks = rec->marks,
	    .mark_count = rec->mark_count,
	    .begin_ns = rec->begin_ns,
	    .end_ns = rec->end_ns,
	    .sample_ns = MS(10),
	    .scratch = &rec->arena,
	};
}

static void only_rows_wholly_in_the_span_belong_to_it(void **state)
{
	(void)state;
	struct recording rec;
	int channel = fill(&rec, 100);
	rec.channels[channel].refresh_ns = MS(2);
	struct check_input in = input_of(&rec);
	struct rows rows;
	/* Row 10 is true in [98, 101] ms, row 20 in [198, 201] ms. */
	assert_int_equal(rows_take(&in, channel, (struct span){MS(98), MS(201)}, &rows, NULL), 0);
	assert_true(rows.usable);
	assert_int_equal(rows.first, 10);
	assert_int_equal(rows.count, 11);
	assert_int_equal(rows_take(&in, channel, (struct span){MS(98.1), MS(200.9)}, &rows, NULL), 0);
	assert_int_equal(rows.first, 11);
	assert_int_equal(rows.count, 9);
	rec.rows[channel][15].value = (double)NAN;
	assert_int_equal(rows_take(&in, channel, (struct span){MS(98), MS(201)}, &rows, NULL), 0);
	assert_int_equal(rows.count, 10);
	assert_int_equal(rows.missing, 1);
	assert_int_equal(rows.gap_ns, MS(20));
	struct err err = {0};
	assert_int_equal(rows_take(&in, 7, (struct span){0, 1}, &rows, &err), -1);
	assert_int_equal(err.code, ERR_STATE);
	recording_release(&rec);
}

/* Crossing windows of 4 and 6 ms: worst case +-5 ms, u 2.0817 ms (JCGM 100 4.3.7). */
static void time_between_two_windows_has_bounds_and_a_standard_uncertainty(void **state)
{
	(void)state;
	struct time_between between = time_between(.010, .014, .030, .036);
	assert_near(between.value, .021, 1e-15, "s");
	assert_near(between.low, .016, 1e-15, "s");
	assert_near(between.high, .026, 1e-15, "s");
	assert_near(between.u, 2.0817e-3, 5e-8, "s");
	assert_near(2 * between.u, 4.163e-3, 5e-7, "s");
}

static void a_crossing_lies_between_rows_surely_before_and_after(void **state)
{
	(void)state;
	struct recording rec;
	int channel = fill(&rec, 20); /* value i at 10 i + 0.5 ms */
	struct crossing_query query = {
	    .rows = {.series = &rec.series[channel], .count = 20},
	    .level = 9.25,
	    .direction = 1,
	};
	struct crossing crossing;
	crossing_first(&query, &crossing);
	assert_true(crossing.found && crossing.clean);
	assert_near(crossing.value, .0930, 1e-12, "s");
	assert_near(crossing.low, .090, 1e-12, "s");
	assert_near(crossing.high, .101, 1e-12, "s");
	assert_near(crossing.time_u, .001 / sqrt(12), 1e-9, "s");
	query.sure = 1;
	query.noise = 1.0 / 3;
	crossing_first(&query, &crossing);
	assert_int_equal(crossing.before, 8);
	assert_int_equal(crossing.after, 11);
	assert_near(crossing.value, .0930, 1e-12, "s");
	query.sure = 0;
	query.gap_most = MS(5);
	crossing_first(&query, &crossing);
	assert_true(crossing.found && !crossing.clean);
	assert_near(crossing.time_u, .011 / sqrt(12), 1e-9, "s");
	query.level = 30;
	crossing_first(&query, &crossing);
	assert_false(crossing.found);
	query.level = -3; /* already beyond it */
	crossing_first(&query, &crossing);
	assert_false(crossing.found);
	query.direction = -1;
	query.level = 5;
	crossing_first(&query, &crossing);
	assert_false(crossing.found);
	recording_release(&rec);
}

static void every_kind_of_check_is_in_the_table_and_complete(void **state)
{
	(void)state;
	size_t count;
	const struct check_kind *const *table = check_table(&count);
	assert_true(count >= 13);
	for (size_t i = 0; i < count; i++) {
		assert_ptr_equal(check_find(table[i]->name, strlen(table[i]->name)), table[i]);
		assert_true(strlen(table[i]->text) > 10);
		assert_non_null(table[i]->evaluate);
		assert_true(table[i]->metric_count > 0 && table[i]->metric_count <= CHECK_METRICS_MOST);
		for (size_t m = 0; m < table[i]->metric_count; m++)
			assert_true(strlen(table[i]->metrics[m].text) > 10);
		for (size_t f = 0; f < table[i]->fields->count; f++) {
			const struct field *field = &table[i]->fields->fields[f];
			assert_true(field->offset < table[i]->params_size);
			assert_true(strlen(field->text) > 5);
			if (field->kind == FIELD_LEVEL || field->kind == FIELD_LEVELS) {
				const char *of = field->of ? field->of : "channel";
				const struct field *channel = field_find(table[i]->fields, of, strlen(of));
				assert_non_null(channel);
				assert_int_equal(channel->kind, FIELD_CHANNEL);
			}
		}
	}
	assert_null(check_find("step", 4));
	assert_null(check_find("step_response_", 14));
}

static void conditions_hold_as_written_and_never_for_nan(void **state)
{
	(void)state;
	struct condition condition = {.kind = CONDITION_IS, .a = 3};
	assert_true(condition_holds(&condition, 3));
	assert_false(condition_holds(&condition, 3.1));
	condition.kind = CONDITION_ABOVE;
	assert_true(condition_holds(&condition, 3.1));
	assert_false(condition_holds(&condition, 3));
	condition.kind = CONDITION_BELOW;
	assert_true(condition_holds(&condition, 2.9));
	assert_false(condition_holds(&condition, 3));
	condition = (struct condition){.kind = CONDITION_BETWEEN, .a = 1, .b = 3};
	assert_true(condition_holds(&condition, 1) && condition_holds(&condition, 3));
	assert_false(condition_holds(&condition, 3.1) || condition_holds(&condition, 0.9));
	for (int kind = CONDITION_IS; kind <= CONDITION_BETWEEN; kind++) {
		condition.kind = (enum condition_kind)kind;
		assert_false(condition_holds(&condition, (double)NAN));
	}
}

int main(void)
{
	const struct CMUnitTest tests[] = {
	    cmocka_unit_test(a_value_was_true_as_much_earlier_as_device_and_instrument_say),
	    cmocka_unit_test(rows_are_found_by_time),
	    cmocka_unit_test(each_fault_of_rows_is_named),
	    cmocka_unit_test(limits_of_error_add_up),
	    cmocka_unit_test(names_of_values_and_exceptions_are_found),
	    cmocka_unit_test(only_rows_wholly_in_the_span_belong_to_it),
	    cmocka_unit_test(time_between_two_windows_has_bounds_and_a_standard_uncertainty),
	    cmocka_unit_test(a_crossing_lies_between_rows_surely_before_and_after),
	    cmocka_unit_test(every_kind_of_check_is_in_the_table_and_complete),
	    cmocka_unit_test(conditions_hold_as_written_and_never_for_nan),
	};
	return RUN_GROUP(tests);
}
