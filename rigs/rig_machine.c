/* SPDX-License-Identifier: Apache-2.0 */
/*
 * The nameplate. Whether a current or flux is rms or peak is part of its unit,
 * so a bare `A` is refused: half of all wrong torque constants are a forgotten
 * square root of two. What is not given stays NaN, and a check that needs it
 * says so.
 */
#include <math.h>
#include <string.h>

#include "rig_loader.h"

struct counts {
	int64_t pole_pairs, encoder_lines;
};

/* clang-format off */
static const struct field ROWS[] = {
	{.key = "pole_pairs", .kind = FIELD_INTEGER, .least = 1, .most = 1000, .offset = offsetof(struct counts, pole_pairs),
	 .text = "pairs of poles"},
	{.key = "encoder_lines", .kind = FIELD_INTEGER, .least = 1, .most = 16777216, .offset = offsetof(struct counts, encoder_lines),
	 .text = "pulses per revolution of A or B; 4 counts per pulse"},
	{.key = "flux_linkage", .kind = FIELD_OWN, .dimension = &DIM_FLUX_AMPLITUDE, .offset = offsetof(struct machine, flux_linkage),
	 .text = "of the magnets with one phase"},
	{.key = "inductance_d", .kind = FIELD_OWN, .dimension = &DIM_INDUCTANCE, .offset = offsetof(struct machine, inductance_d),
	 .text = "in the d axis"},
	{.key = "inductance_q", .kind = FIELD_OWN, .dimension = &DIM_INDUCTANCE, .offset = offsetof(struct machine, inductance_q),
	 .text = "in the q axis"},
	{.key = "resistance", .kind = FIELD_OWN, .dimension = &DIM_RESISTANCE, .offset = offsetof(struct machine, resistance),
	 .text = "of one phase"},
	{.key = "rated_speed", .kind = FIELD_OWN, .dimension = &DIM_SPEED_MECH, .offset = offsetof(struct machine, rated_speed),
	 .text = "of the shaft"},
	{.key = "rated_torque", .kind = FIELD_OWN, .dimension = &DIM_TORQUE, .offset = offsetof(struct machine, rated_torque),
	 .text = "at the shaft"},
	{.key = "rated_current", .kind = FIELD_OWN, .dimension = &DIM_CURRENT_AMPLITUDE, .offset = offsetof(struct machine, rated_current),
	 .text = "of one phase"},
	{.key = "dc_voltage", .kind = FIELD_OWN, .dimension = &DIM_VOLTAGE, .offset = offsetof(struct machine, dc_voltage),
	 .text = "of the DC link"},
};

struct toleranced {
	double tolerance;
};
static const struct field VALUE_ROWS[] = {
	{.key = "value", .kind = FIELD_OWN, .flags = FIELD_REQUIRED, .text = "with its unit"},
	{.key = "tolerance", .kind = FIELD_QUANTITY, .dimension = &DIM_NUMBER, .least = 0, .most = 0.9, .fallback = "0",
	 .offset = offsetof(struct toleranced, tolerance), .text = "share by which the machine may differ, such as 5 %"},
};
/* clang-format on */
const struct field_table RIG_MACHINE_FIELDS = {"machine", "nameplate of the motor under test", ROWS,
                                               FIELD_COUNT(ROWS)};
static const struct field_table VALUE = {"nameplate value", "a value with its tolerance",
                                         VALUE_ROWS, FIELD_COUNT(VALUE_ROWS)};

static void load_value(struct rig_loader *loader, const struct yaml_node *node,
                       const struct field *field, struct nameplate_value *ret)
{
	struct toleranced toleranced = {0};
	const struct yaml_node *value = node;
	if (node->kind == YAML_MAPPING) {
		(void)bind_mapping(&loader->binder, &VALUE, node, &toleranced);
		value = yaml_get(node, "value");
		if (!value)
			return;
	}
	struct quantity quantity;
	if (!bind_quantity(&loader->binder, value, NULL, field->dimension, &quantity))
		return;
	if (!(quantity.value > 0)) {
		rig_fault(loader, value, "%s must be above 0", field->key);
		return;
	}
	*ret = (struct nameplate_value){quantity_si(quantity), toleranced.tolerance};
}

void rig_machine_load(struct rig_loader *loader, const struct yaml_node *node)
{
	struct machine *machine = &loader->rig->machine;
	struct counts counts = {0};
	if (node)
		(void)bind_mapping(&loader->binder, &RIG_MACHINE_FIELDS, node, &counts);
	machine->pole_pairs = (int)counts.pole_pairs;
	machine->encoder_lines = (int)counts.encoder_lines;
	for (size_t i = 0; i < FIELD_COUNT(ROWS); i++) {
		if (!ROWS[i].dimension)
			continue;
		struct nameplate_value *value =
		    (struct nameplate_value *)(void *)((char *)machine + ROWS[i].offset);
		*value = (struct nameplate_value){(double)NAN, 0};
		const struct yaml_node *given = yaml_get(node, ROWS[i].key);
		if (given)
			load_value(loader, given, &ROWS[i], value);
	}
}
