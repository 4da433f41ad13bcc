/* SPDX-License-Identifier: Apache-2.0 */
#ifndef DRIVETRIAL_SERVED_INNER_H
#define DRIVETRIAL_SERVED_INNER_H
/*
 * What the parts of the served register map share: served.c binds it,
 * served_map.c reads and writes areas of it, served_answer.c is the protocol.
 */
#include "served.h"

/* A channel as it is served. */
struct served_entry {
	const struct rig_channel *channel;
	int signal;     /* row of model_signals() */
	int first, end; /* addresses [first, end) */
	uint16_t shown; /* high word of the last answer; by the defect torn */
};

/* The registers or bits of one device and place. */
struct served_area {
	struct served_entry *entries;
	size_t count;
	int first, end;           /* used range [first, end); equal: nothing is there */
	uint16_t *image;          /* end - first words: what a read of all of it would give */
	unsigned char *described; /* end - first: 1 where an entry lies */
};

enum { SERVED_PLACES = PLACE_IDENTIFICATION + 1, SERVED_OBJECT_BYTES_MOST = 240 };

struct served_device {
	const struct rig_device *device;
	struct served_area areas[SERVED_PLACES]; /* of identification: entries only */
	unsigned heard;                          /* bit per enum model_device that it stands for */
	bool wrong_exception, writes_neighbour;  /* defects of this device */
	bool swaps_words, tears;                 /* defects of its values of two registers */
	unsigned pairs_read;                     /* how many of these were answered */
};

struct served {
	const struct rig *rig;
	struct arena arena;
	struct model *model;
	struct served_device *devices; /* as in the rig */
};

/*
 * Reads [address, address + count) of an area into words. Returns 0, or the
 * Modbus exception.
 */
int served_read(struct served *served, struct served_device *device, enum place place,
                unsigned address, unsigned count, uint16_t *words);
/* Writes them: all or nothing. Returns 0, or the Modbus exception. */
int served_write(struct served *served, struct served_device *device, enum place place,
                 unsigned address, unsigned count, const uint16_t *words);
/* Object of the device identification into text[SERVED_OBJECT_BYTES_MOST + 1]; its length, or -1.
 */
int served_object(struct served *served, const struct served_device *device, unsigned object,
                  char *text);

#endif
