/* SPDX-License-Identifier: Apache-2.0 */
/* Any bytes as a rig file; a rig that is taken must be fit for what is asked of it next. */
#include <unistd.h>

#include "fuzz.h"
#include "served.h"

static void use(const struct rig *rig)
{
	struct faults lacks = {0}, faults = {0};
	struct err err = {0};
	struct served *served = NULL;
	for (size_t i = 0; i < rig->channel_count; i++) {
		const struct rig_channel *channel = &rig->channels[i];
		demand(channel->device >= -1 && channel->device < (int)rig->device_count);
		demand(!channel->command || channel->least <= channel->most);
		demand(rig_channel_device(rig, (int)i) >= 0);
	}
	for (size_t i = 0; i < rig->safe_state_count; i++) {
		char text[256];
		fuzz_readable(step_text(&rig->safe_state[i], rig, text, sizeof text));
	}
	(void)rig_unattended_ready(rig, &lacks);
	if (rig->has_model) {
		int rc = served_new(rig, 1, 0, &faults, &served, &err);
		fuzz_loaded(rc, served, &faults, &err);
		served_release(served);
	}
}

int LLVMFuzzerTestOneInput(const uint8_t *data, size_t size)
{
	struct arena arena;
	struct faults faults = {0};
	struct err err = {0};
	const struct rig *rig = NULL;
	char path[64];
	int fd = fuzz_file(data, size, path, sizeof path);
	arena_init(&arena, 64 << 20);
	int rc = rig_load(path, &arena, &faults, &rig, &err);
	fuzz_loaded(rc, rig, &faults, &err);
	if (rc == 0 && rig)
		use(rig);
	arena_release(&arena);
	(void)close(fd);
	return 0;
}
