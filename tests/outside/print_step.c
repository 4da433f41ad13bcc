/* SPDX-License-Identifier: Apache-2.0 */
/*
 * step_response over samples from standard input, for differential.py. Each
 * response: "NUMBER_OF_ROWS COMMAND_VALUE BAND END_NS", then rows "T_NS VALUE";
 * the step is commanded at 0. Prints one line a response: for each metric name,
 * value, low, high.
 */
#include "recording.h"

#include <inttypes.h>

int main(void)
{
	static struct recording rec;
	static struct used_check use;
	recording_init(&rec);
	int channel = recording_channel(&rec, "speed", "rpm", EVIDENCE_SELF_REPORTED);
	check_use(&use, "step_response");
	check_int(&use, "channel", channel);
	check_int(&use, "from", 0);
	check_ns(&use, "initial_for", S(1000));
	size_t rows;
	double command, band;
	int64_t end;
	while (scanf("%zu %lf %lf %" SCNd64, &rows, &command, &band, &end) == 4) {
		recording_clear(&rec);
		recording_mark(&rec, "commanded", 0, 0);
		recording_command(&rec, channel, command, 0, 0);
		for (size_t i = 0; i < rows; i++) {
			int64_t t;
			double value;
			if (scanf("%" SCNd64 " %lf", &t, &value) != 2)
				return 1;
			if (i == 0)
				rec.begin_ns = t;
			recording_at(&rec, channel, t, value);
		}
		rec.end_ns = end;
		rec.sample_ns = end / (int64_t)rows;
		check_double(&use, "band", band);
		check_run(&use, &rec);
		for (size_t i = 0; i < use.count; i++)
			printf("%s %.17g %.17g %.17g ", use.metrics[i].kind->name, use.metrics[i].value,
			       use.metrics[i].low, use.metrics[i].high);
		printf("\n");
	}
	recording_release(&rec);
	return 0;
}
