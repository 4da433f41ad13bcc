/* SPDX-License-Identifier: Apache-2.0 */
/* Mappings bound to structures by field tables, and what scalars are refused. */
#include "loaded.h"

#include "bind.h"

static const char *const WORDS[] = {"low", "high", NULL};

struct target {
	const char *name, *text;
	bool on;
	int64_t whole, pause_ns;
	double number, share, torque;
	int word;
	int channel;
};

#define AT(member) .offset = offsetof(struct target, member)
static const struct field FIELDS[] = {
    {.key = "name", .kind = FIELD_NAME, .flags = FIELD_REQUIRED, AT(name), .text = "its name"},
    {.key = "text", .kind = FIELD_TEXT, .fallback = "", AT(text), .text = "t"},
    {.key = "on", .kind = FIELD_YES_NO, .fallback = "yes", AT(on), .text = "t"},
    {.key = "whole", .kind = FIELD_INTEGER, .least = 1, .most = 9, .fallback = "3", AT(whole)},
    {.key = "pause", .kind = FIELD_DURATION, .flags = FIELD_POSITIVE, AT(pause_ns)},
    {.key = "number", .kind = FIELD_NUMBER, AT(number)},
    {.key = "share", .kind = FIELD_QUANTITY, .most = 1, AT(share)},
    {.key = "torque",
     .kind = FIELD_QUANTITY,
     .dimension = &DIM_TORQUE,
     .least = -3,
     .most = 3,
     AT(torque)},
    {.key = "word", .kind = FIELD_CHOICE, .choices = WORDS, .fallback = "high", AT(word)},
    {.key = "own", .kind = FIELD_OWN},
    {.key = "channel", .kind = FIELD_CHANNEL, AT(channel)},
};
static const struct field_table TABLE = {"thing", "", FIELDS, FIELD_COUNT(FIELDS)};
static const struct field BESIDE_FIELDS[] = {{.key = "other", .kind = FIELD_OWN}};
static const struct field_table BESIDE = {"thing", "", BESIDE_FIELDS, 1};

static bool resolve(void *context, const struct field_table *table, const struct field *field,
                    const struct yaml_node *mapping, const struct yaml_node *node, void *target)
{
	(void)context;
	(void)table;
	(void)field;
	(void)mapping;
	*(int *)target = node ? 7 : -1;
	return true;
}

static const struct yaml_node *substitute(void *context, const struct yaml_node *node)
{
	const struct yaml_node *values = context;
	return yaml_get(values, node->text + 1);
}

static bool bind(struct loaded *loaded, const char *text, struct target *target)
{
	*target = (struct target){0};
	loaded_init(loaded, text);
	assert_non_null(loaded->root);
	struct binder binder = {.arena = &loaded->arena,
	                        .faults = &loaded->faults,
	                        .resolve = resolve,
	                        .substitute = substitute,
	                        .context = yaml_get(loaded->root, "values")};
	return bind_mapping(&binder, &TABLE, yaml_get(loaded->root, "t"), target);
}

static void stores_each_kind(void **state)
{
	(void)state;
	struct loaded loaded;
	struct target target;
	assert_true(bind(&loaded,
	                 "t: {name: SPD-01, text: any thing, on: no, whole: 9, pause: 1.5 ms,\n"
	                 "    number: -1e-3, share: 5 %, torque: 1200 mNm, word: low, own: [x],\n"
	                 "    channel: speed}\n",
	                 &target));
	assert_string_equal(target.name, "SPD-01");
	assert_string_equal(target.text, "any thing");
	assert_false(target.on);
	assert_int_equal(target.whole, 9);
	assert_int_equal(target.pause_ns, 1500000);
	assert_near(target.number, -0.001, 0, "");
	assert_near(target.share, 0.05, 1e-17, "");
	assert_near(target.torque, 1.2, 1e-15, "Nm");
	assert_int_equal(target.word, 0);
	assert_int_equal(target.channel, 7);
	loaded_release(&loaded);
}

static void applies_defaults_and_none(void **state)
{
	(void)state;
	struct loaded loaded;
	struct target target;
	assert_true(bind(&loaded, "t: {name: a}\n", &target));
	assert_string_equal(target.text, "");
	assert_true(target.on);
	assert_int_equal(target.whole, 3);
	assert_int_equal(target.word, 1);
	assert_int_equal(target.pause_ns, 0);
	assert_int_equal(target.channel, -1);
	loaded_release(&loaded);
}

static void reads_values_by_name(void **state)
{
	(void)state;
	struct loaded loaded;
	struct target target;
	assert_true(bind(&loaded,
	                 "t: {name: a, torque: $load, word: $which}\n"
	                 "values: {load: 2 Nm, which: low}\n",
	                 &target));
	assert_near(target.torque, 2, 0, "Nm");
	assert_int_equal(target.word, 0);
	loaded_release(&loaded);
}

static void refuses_with_position_and_hint(void **state)
{
	(void)state;
	static const struct {
		const char *text;
		int line, column;
		const char *part;
	} rows[] = {
	    {"t: {text: x}\n", 1, 4, "the key 'name' is missing in a thing (its name)"},
	    {"t: [a]\n", 1, 4, "a thing must be a mapping, not a list"},
	    {"t: {name: a, nmae: b}\n", 1, 14, "unknown key 'nmae' in a thing; did you mean 'name'?"},
	    {"t: {name: a, colour: b}\n", 1, 14, "unknown key 'colour' in a thing"},
	    {"t: {name: 1a}\n", 1, 11, "name: '1a' is not a name"},
	    {"t: {name: }\n", 1, 11, "name: a value is missing"},
	    {"t: {name: [a]}\n", 1, 11, "name: expected a name, not a list"},
	    {"t: {name: a, on: NO}\n", 1, 18, "write no"},
	    {"t: {name: a, on: y}\n", 1, 18, "write yes"},
	    {"t: {name: a, on: \"yes\"}\n", 1, 18, "without quotes"},
	    {"t: {name: a, whole: 010}\n", 1, 21, "leading zero"},
	    {"t: {name: a, whole: 0x5}\n", 1, 21, "decimal"},
	    {"t: {name: a, whole: 1_0}\n", 1, 21, "underscores"},
	    {"t: {name: a, whole: 1:30}\n", 1, 21, "90 s"},
	    {"t: {name: a, whole: 1.5}\n", 1, 21, "not a whole number"},
	    {"t: {name: a, whole: 0}\n", 1, 21, "expected a whole number between 1 and 9, not 0"},
	    {"t: {name: a, whole: 10}\n", 1, 21, "between 1 and 9, not 10"},
	    {"t: {name: a, whole: \"5\"}\n", 1, 21, "in quotes"},
	    {"t: {name: a, pause: 5}\n", 1, 21, "no unit in '5'"},
	    {"t: {name: a, pause: 0 s}\n", 1, 21, "above 0"},
	    {"t: {name: a, pause: -1 s}\n", 1, 21, "between 0 and 366 days"},
	    {"t: {name: a, share: 101 %}\n", 1, 21, "not 101 %"},
	    {"t: {name: a, torque: 4 Nm}\n", 1, 22, "must lie between -3 and 3 Nm, not 4 Nm"},
	    {"t: {name: a, torque: 4 V}\n", 1, 22, "expected a torque in Nm, mNm"},
	    {"t: {name: a, torque: $no}\nvalues: {x: 1}\n", 1, 22, "there is no value '$no'"},
	    {"t: {name: a, word: hihg}\n", 1, 20, "did you mean 'high'? Expected low or high"},
	    {"t: {name: a, word: green}\n", 1, 20, "expected low or high"},
	};
	for (size_t i = 0; i < sizeof rows / sizeof rows[0]; i++) {
		struct loaded loaded;
		struct target target;
		assert_false(bind(&loaded, rows[i].text, &target));
		assert_fault(&loaded, rows[i].line, rows[i].column, rows[i].part);
		loaded_release(&loaded);
	}
}

static void reports_all_faults_of_a_mapping(void **state)
{
	(void)state;
	struct loaded loaded;
	struct target target;
	assert_false(bind(&loaded, "t: {nmae: b, whole: 0, pause: 5, word: x, number: 3}\n", &target));
	assert_int_equal(loaded.faults.count, 5);
	assert_near(target.number, 3, 0, "");
	loaded_release(&loaded);
}

static void knows_the_keys_of_a_table_beside(void **state)
{
	(void)state;
	struct loaded loaded;
	struct target target = {0};
	loaded_init(&loaded, "{name: a, other: 5, othre: 6}\n");
	struct binder binder = {.arena = &loaded.arena, .faults = &loaded.faults, .resolve = resolve};
	assert_false(bind_mapping_beside(&binder, &TABLE, &BESIDE, loaded.root, &target));
	assert_int_equal(loaded.faults.count, 1);
	assert_fault(&loaded, 1, 21, "did you mean 'other'?");
	loaded_release(&loaded);
}

static void refuses_text_that_is_too_long(void **state)
{
	(void)state;
	char text[1100] = "t: {name: a, text: ";
	memset(text + strlen(text), 'x', 1001);
	strcat(text, "}\n");
	struct loaded loaded;
	struct target target;
	assert_false(bind(&loaded, text, &target));
	assert_fault(&loaded, 1, 20, "longer than 1000");
	loaded_release(&loaded);
}

static void refuses_values_by_name_where_there_are_none(void **state)
{
	(void)state;
	struct loaded loaded;
	loaded_init(&loaded, "$x\n");
	struct binder binder = {.arena = &loaded.arena, .faults = &loaded.faults};
	double number;
	assert_false(bind_number(&binder, loaded.root, &number));
	assert_fault(&loaded, 1, 1, "in suites only");
	loaded_release(&loaded);
}

int main(void)
{
	const struct CMUnitTest tests[] = {
	    cmocka_unit_test(stores_each_kind),
	    cmocka_unit_test(applies_defaults_and_none),
	    cmocka_unit_test(reads_values_by_name),
	    cmocka_unit_test(refuses_with_position_and_hint),
	    cmocka_unit_test(reports_all_faults_of_a_mapping),
	    cmocka_unit_test(knows_the_keys_of_a_table_beside),
	    cmocka_unit_test(refuses_text_that_is_too_long),
	    cmocka_unit_test(refuses_values_by_name_where_there_are_none),
	};
	return RUN_GROUP(tests);
}
