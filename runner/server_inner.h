/* SPDX-License-Identifier: Apache-2.0 */
#ifndef DRIVETRIAL_SERVER_INNER_H
#define DRIVETRIAL_SERVER_INNER_H
/* What server.c (the loop), server_tcp.c and server_rtu.c share. */
#include "link.h"
#include "server.h"

enum { MBAP_BYTES = 7, TCP_ADU_MOST = MBAP_BYTES + LINK_PDU_MOST, RTU_ADU_MOST = 256 };

struct tcp_client {
	int fd; /* -1: free */
	int link;
	size_t length;
	uint8_t bytes[4 * TCP_ADU_MOST]; /* received, not yet answered */
};

/* One link of the rig. */
struct served_link {
	char address[128];
	int listener;      /* TCP; -1: none */
	int master, slave; /* RTU; -1: none. The slave is held so that the master never hangs up. */
	int64_t silence_ns;
	int64_t first_byte_ns, last_byte_ns; /* monotonic */
	size_t length;
	uint8_t bytes[RTU_ADU_MOST];
	/* RTU, paced as a wire is: times are monotonic */
	int64_t character_ns; /* 0: not paced */
	int64_t t35_ns;
	size_t request_length; /* a whole request that is answered at answer_ns; 0: none */
	int64_t answer_ns;
	size_t out_length, out_done; /* the reply on its way, byte by byte since out_ns */
	int64_t out_ns;
	uint8_t out[RTU_ADU_MOST];
};

struct server {
	struct served *served;
	const struct rig *rig;
	struct served_link *links; /* as in the rig */
	struct tcp_client clients[SERVER_CLIENTS_MOST];
	int64_t start_ns; /* monotonic instant of model time 0; -1: not started */
	bool told_late;
};

/* Moves the model to the present. Returns by how much it had fallen behind after that. */
int64_t server_advance(struct server *server);

int server_tcp_listen(struct served_link *link, const char *host, unsigned port,
                      struct err *reterr);
void server_tcp_accept(struct server *server, int link);
/* Reads and answers; closes the client where it ends or breaks the protocol. */
void server_tcp_serve(struct server *server, struct tcp_client *client);

/* baud: of the pace; 0: as fast as the pty takes it; -1: what the rig says. */
int server_rtu_open(struct served_link *link, const struct link_config *config, int baud,
                    struct err *reterr);
void server_rtu_receive(struct server *server, int link);
/* Does what is due: ends a frame by silence, answers, sends. When to look again, or INT64_MAX. */
int64_t server_rtu_due(struct server *server, int link);

#endif
