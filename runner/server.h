/* SPDX-License-Identifier: Apache-2.0 */
#ifndef DRIVETRIAL_SERVER_H
#define DRIVETRIAL_SERVER_H
/*
 * The modelled bench behind sockets and pseudo terminals, in real time.
 *
 * One thread, one poll() loop: it moves the model to the present at each wake
 * (at least once a millisecond) and before each answer, takes Modbus TCP
 * clients, and answers RTU frames on the ptys that it opened.
 *
 *     server_new(served, rig, &server, &err);
 *     server_listen(server, 0, "tcp:127.0.0.1:0", &err);
 *     printf("%s\n", server_address(server, 0));
 *     server_run(server, wake_fd, on_wake, context);
 *     server_release(server);
 *
 * Threads: all calls from one thread; another one ends the loop through
 * wake_fd. Limits: SERVER_CLIENTS_MOST connections, others are turned away.
 */
#include "served.h"

enum { SERVER_CLIENTS_MOST = 32 };

struct server;

/* served and rig are borrowed until server_release(). */
int server_new(struct served *served, const struct rig *rig, struct server **ret_server,
               struct err *reterr);
void server_release(struct server *server); /* takes NULL */

/*
 * Opens a link of the rig. address: "tcp:HOST:PORT" (port 0: any free one),
 * "rtu" (a new pseudo terminal, as slow as a line of the rig's baud rate),
 * "rtu:BAUD" (of this rate; 0: not slowed), or NULL for what the rig file says.
 * Errors: ERR_USAGE (no address), ERR_LINK (cannot be opened).
 */
int server_listen(struct server *server, int link, const char *address, struct err *reterr);
/* "tcp:127.0.0.1:15020" or "rtu:/dev/pts/3"; "" before server_listen(). Borrowed. */
const char *server_address(const struct server *server, int link);

/*
 * Serves until on_wake returns true; it is called when wake_fd is readable and
 * must read from it. Model time begins with the first call. late: called once,
 * when the model has fallen behind real time by more than 50 ms, with by how
 * much; may be NULL. Returns -1 only where poll() fails.
 */
int server_run(struct server *server, int wake_fd, bool (*on_wake)(void *context),
               void (*late)(void *context, int64_t behind_ns), void *context);

/* The state of the shaft in one line: "rest speed_rpm=0.0 torque_nm=0.0 running=no". */
const char *server_state(struct served *served, char *buffer, size_t size);

#endif
