/* SPDX-License-Identifier: Apache-2.0 */
#ifndef DRIVETRIAL_LINK_H
#define DRIVETRIAL_LINK_H
/*
 * One wire: requests go out, replies come in, one at a time.
 *
 * begin() takes a request; end() gives its reply. A backend that blocks (TCP,
 * RTU) does so in end(), for at most the reply timeout (where it must first
 * reconnect, or wait for a serial line to fall silent, that comes on top); a
 * backend in virtual time (the modelled bench) returns when the reply is due
 * instead. The caller is the same state machine for both:
 *
 *     link_begin(link, &request, now, &err);
 *     int64_t due = link_end(link, clock(), &reply);
 *     if (due > now) come back at `due`; else the reply is there
 *
 * A link whose depth is above 1 takes as many requests before the first end();
 * end() then gives the replies in the order of the requests. After one that is
 * neither OK nor EXCEPTION all others end before anything else may be begun.
 *
 * Invariants. One worker owns a link and is the sole caller of everything but
 * link_interrupt(), which any thread may call. After a request whose reply is
 * not LINK_OK or LINK_EXCEPTION the backend has made sure (flush, quiet time,
 * reconnect) that a late reply can never be taken for that of a later request,
 * as far as the protocol allows. Backends never retry: the worker decides.
 * Backends never print.
 */
#include <stddef.h>
#include <stdint.h>

#include "err.h"

enum {
	LINK_REGISTERS_MOST = 125, /* of one read: Modbus Application Protocol V1.1b3 */
	LINK_BITS_MOST = 2000,
	LINK_WRITE_REGISTERS_MOST = 123,
	LINK_WRITE_BITS_MOST = 1968,
	LINK_PDU_MOST = 253,
};

enum link_function {
	LINK_READ_COILS = 1,
	LINK_READ_DISCRETE_INPUTS = 2,
	LINK_READ_HOLDING_REGISTERS = 3,
	LINK_READ_INPUT_REGISTERS = 4,
	LINK_WRITE_COIL = 5,
	LINK_WRITE_REGISTER = 6,
	LINK_WRITE_COILS = 15,
	LINK_WRITE_REGISTERS = 16,
	LINK_MASK_WRITE = 22, /* words[0] AND mask, words[1] OR mask */
	LINK_IDENTIFY = 43,   /* function 43/14, one object: address = object id */
	LINK_RAW = 0,         /* pdu[0..pdu_length) as it stands, for `attempt` */
};

struct link_request {
	uint8_t unit;
	enum link_function function;
	uint16_t address;
	uint16_t count;                      /* registers or bits; writes too */
	uint16_t words[LINK_REGISTERS_MOST]; /* what is written: registers, or bits as 0 and 1 */
	uint8_t pdu[LINK_PDU_MOST];          /* LINK_RAW */
	uint16_t pdu_length;
};

enum link_status {
	LINK_OK = 0,
	LINK_EXCEPTION, /* a well-formed refusal: reply.exception */
	LINK_TIMEOUT,   /* no reply within the timeout */
	LINK_GARBLED,   /* CRC, length, unit, function or transaction do not match */
	LINK_LOST,      /* the connection is gone, or could not be made */
	LINK_STOPPED,   /* broken off by link_interrupt() */
	LINK_REFUSED,   /* never sent: the rig does not allow it */
};

struct link_reply {
	enum link_status status;
	uint8_t exception;
	uint16_t count;
	uint16_t words[LINK_BITS_MOST]; /* registers, or bits as 0 and 1 */
	char text[256];             /* LINK_IDENTIFY: the object's value, NUL-terminated, raw bytes */
	uint8_t pdu[LINK_PDU_MOST]; /* LINK_RAW */
	uint16_t pdu_length;
	int64_t sent_ns;     /* clock just before the request went out */
	int64_t received_ns; /* clock just after the reply was complete, or given up */
	char message[160];   /* for people, where status is neither OK nor EXCEPTION */
};

struct link;

struct link_ops {
	const char *name; /* "tcp", "rtu", "model" */
	/* Connects or opens. Blocks at most the reply timeout. Closes first if open. */
	int (*open)(struct link *link, struct err *reterr);
	void (*close)(struct link *link);
	int (*begin)(struct link *link, const struct link_request *request, int64_t now_ns,
	             struct err *reterr);
	/* Returns now_ns or less once *ret_reply is filled, else when to ask again. */
	int64_t (*end)(struct link *link, int64_t now_ns, struct link_reply *ret_reply);
	/* Any thread: breaks off the request between begin() and the return of end();
	 * does nothing where there is none. */
	void (*interrupt)(struct link *link);
	void (*release)(struct link *link);
};

/* The first member of every backend's own structure. */
struct link {
	const struct link_ops *ops;
	/* Monotonic time in ns; the backend stamps sent_ns and received_ns with it. */
	int64_t (*clock)(void *context);
	void *clock_context;
	int depth;         /* requests that may be under way; 0 is as 1 */
	char address[128]; /* for messages: "tcp 127.0.0.1:15020" */
};

enum link_parity { PARITY_NONE = 0, PARITY_EVEN, PARITY_ODD };

struct link_config {
	const char *tcp_host; /* NULL: RTU */
	uint16_t tcp_port;
	const char *serial_path;
	int baud; /* whitelisted by the loader */
	enum link_parity parity;
	int stop_bits;
	int64_t reply_timeout_ns;
	int in_flight; /* link_tcp_flight_new(): requests that may be under way, 1 to 16 */
	int64_t (*clock)(void *context);
	void *clock_context;
};

/*
 * Modbus TCP, and RTU through libmodbus. *ret_link is owned by the caller,
 * closed until link_open() (a request on a closed link opens it). Names are
 * resolved here. Errors: ERR_LINK (bad address), ERR_NOMEM.
 */
int link_tcp_new(const struct link_config *config, struct link **ret_link, struct err *reterr);
int link_rtu_new(const struct link_config *config, struct link **ret_link, struct err *reterr);
/* Modbus TCP with several requests under way, for devices that say that they take them. */
int link_tcp_flight_new(const struct link_config *config, struct link **ret_link,
                        struct err *reterr);

/*
 * The modelled bench in this process, in virtual time. `execute` answers one
 * PDU as the device at `unit` would at time at_ns, and returns the length of
 * the reply (0: no answer). The reply is due after what rigs/links/timing.h
 * says for the request.
 */
typedef size_t link_execute(void *context, uint8_t unit, const uint8_t *pdu, size_t length,
                            int64_t at_ns, uint8_t *ret_reply);
struct timing;
int link_model_new(const struct link_config *config, const struct timing *timing, uint64_t seed,
                   link_execute *execute, void *context, struct link **ret_link,
                   struct err *reterr);

static inline int link_open(struct link *link, struct err *reterr)
{
	return link->ops->open(link, reterr);
}
static inline void link_close(struct link *link)
{
	link->ops->close(link);
}
static inline int link_begin(struct link *link, const struct link_request *request, int64_t now_ns,
                             struct err *reterr)
{
	return link->ops->begin(link, request, now_ns, reterr);
}
static inline int64_t link_end(struct link *link, int64_t now_ns, struct link_reply *ret_reply)
{
	return link->ops->end(link, now_ns, ret_reply);
}
static inline void link_interrupt(struct link *link)
{
	link->ops->interrupt(link);
}
/* Takes NULL. */
static inline void link_release(struct link *link)
{
	if (link)
		link->ops->release(link);
}

#endif
