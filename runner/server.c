/* SPDX-License-Identifier: Apache-2.0 */
/*
 * One loop for all links and the clock. A thread for each client was rejected:
 * the model belongs to one thread, and locks around it would make the order
 * of requests, and with it the run, depend on the scheduler.
 */
#include "server_inner.h"

#include <errno.h>
#include <math.h>
#include <poll.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <sys/prctl.h>
#include <unistd.h>

#include "waiting.h"

#define STEP_NS   INT64_C(1000000)  /* the model moves at least so often */
#define BEHIND_NS INT64_C(50000000) /* worth telling */
#define REST_RPM  10.0

int server_new(struct served *served, const struct rig *rig, struct server **ret_server,
               struct err *reterr)
{
	struct server *server = calloc(1, sizeof *server);
	*ret_server = NULL;
	if (!server)
		return err_set(reterr, ERR_NOMEM, "memory ran out");
	server->served = served;
	server->rig = rig;
	server->start_ns = -1;
	for (size_t i = 0; i < SERVER_CLIENTS_MOST; i++)
		server->clients[i].fd = -1;
	server->links = calloc(rig->link_count + 1, sizeof *server->links);
	if (!server->links) {
		server_release(server);
		return err_set(reterr, ERR_NOMEM, "memory ran out");
	}
	for (size_t i = 0; i < rig->link_count; i++)
		server->links[i].listener = server->links[i].master = server->links[i].slave = -1;
	*ret_server = server;
	return 0;
}

static void close_fd(int fd)
{
	if (fd >= 0)
		(void)close(fd);
}

void server_release(struct server *server)
{
	if (!server)
		return;
	for (size_t i = 0; i < SERVER_CLIENTS_MOST; i++)
		close_fd(server->clients[i].fd);
	for (size_t i = 0; server->links && i < server->rig->link_count; i++) {
		close_fd(server->links[i].listener);
		close_fd(server->links[i].slave);
		close_fd(server->links[i].master);
	}
	free(server->links);
	free(server);
}

/* "HOST:PORT" or "[HOST]:PORT" into parts. */
static bool split_address(const char *address, char *host, size_t size, unsigned *ret_port)
{
	const char *colon = strrchr(address, ':');
	char *end;
	if (!colon || colon == address || (size_t)(colon - address) >= size)
		return false;
	size_t length = (size_t)(colon - address);
	if (address[0] == '[' && colon[-1] == ']' && length > 2) {
		address++;
		length -= 2;
	}
	memcpy(host, address, length);
	host[length] = '\0';
	unsigned long port = strtoul(colon + 1, &end, 10);
	*ret_port = (unsigned)port;
	return colon[1] >= '0' && colon[1] <= '9' && *end == '\0' && port <= 65535;
}

static bool split_rate(const char *text, unsigned *ret_baud)
{
	char *end;
	unsigned long baud = strtoul(text, &end, 10);
	*ret_baud = (unsigned)baud;
	return text[0] >= '0' && text[0] <= '9' && *end == '\0' && baud <= 10000000;
}

int server_listen(struct server *server, int link, const char *address, struct err *reterr)
{
	const struct link_config *config = &server->rig->links[link].config;
	struct served_link *served = &server->links[link];
	char host[96];
	unsigned port;

	if (!address && config->tcp_host)
		return server_tcp_listen(served, config->tcp_host, config->tcp_port, reterr);
	if (!address || strcmp(address, "rtu") == 0)
		return server_rtu_open(served, config, -1, reterr);
	if (strncmp(address, "rtu:", 4) == 0 && split_rate(address + 4, &port))
		return server_rtu_open(served, config, (int)port, reterr);
	if (strncmp(address, "tcp:", 4) != 0 || !split_address(address + 4, host, sizeof host, &port))
		return err_set(reterr, ERR_USAGE,
		               "'%s' is no address: write tcp:HOST:PORT, rtu or rtu:BAUD", address);
	return server_tcp_listen(served, host, port, reterr);
}

const char *server_address(const struct server *server, int link)
{
	return server->links[link].address;
}

int64_t server_advance(struct server *server)
{
	struct model *model = served_model(server->served);
	model_advance(model, waiting_now() - server->start_ns);
	return waiting_now() - server->start_ns - model_now(model);
}

const char *server_state(struct served *served, char *buffer, size_t size)
{
	struct model *model = served_model(served);
	double rpm = model_read(model, model_signal_find("shaft.speed", 11)) * 60 / (2 * M_PI);
	double torque = model_read(model, model_signal_find("shaft.torque", 12));
	bool running = model_read(model, model_signal_find("controller.running", 18)) != 0;
	(void)snprintf(buffer, size, "%s speed_rpm=%.1f torque_nm=%.3f running=%s",
	               fabs(rpm) < REST_RPM ? "rest" : "moving", rpm, torque, running ? "yes" : "no");
	return buffer;
}

/* What a descriptor in the poll set is. */
struct watched {
	enum { WATCH_WAKE, WATCH_LISTENER, WATCH_CLIENT, WATCH_LINE } what;
	int index;
};

struct watch_set {
	struct pollfd *fds;
	struct watched *watched;
	nfds_t count;
};

static void watch(struct watch_set *set, int fd, struct watched watched)
{
	if (fd < 0)
		return;
	set->fds[set->count] = (struct pollfd){.fd = fd, .events = POLLIN};
	set->watched[set->count++] = watched;
}

static void collect(struct server *server, int wake_fd, struct watch_set *set)
{
	set->count = 0;
	watch(set, wake_fd, (struct watched){WATCH_WAKE, 0});
	for (int i = 0; i < (int)server->rig->link_count; i++) {
		watch(set, server->links[i].listener, (struct watched){WATCH_LISTENER, i});
		watch(set, server->links[i].master, (struct watched){WATCH_LINE, i});
	}
	for (int i = 0; i < SERVER_CLIENTS_MOST; i++)
		watch(set, server->clients[i].fd, (struct watched){WATCH_CLIENT, i});
}

static void serve(struct server *server, struct watched watched)
{
	switch (watched.what) {
	case WATCH_WAKE:
		return; /* by the caller */
	case WATCH_LISTENER:
		server_tcp_accept(server, watched.index);
		return;
	case WATCH_CLIENT:
		server_tcp_serve(server, &server->clients[watched.index]);
		return;
	case WATCH_LINE:
		server_rtu_receive(server, watched.index);
		return;
	}
}

/* Waits for the next thing to do: a descriptor, the model's step, the end of a frame. */
static int wait(struct server *server, struct watch_set *set)
{
	int64_t until_ns = waiting_now() + STEP_NS;
	for (int i = 0; i < (int)server->rig->link_count; i++) {
		int64_t end_ns = server_rtu_due(server, i);
		until_ns = end_ns < until_ns ? end_ns : until_ns;
	}
	int64_t left_ns = until_ns - waiting_now();
	const struct timespec left = {.tv_nsec = left_ns > 0 ? left_ns : 0};
	int ready = ppoll(set->fds, set->count, &left, NULL);
	return ready < 0 && errno == EINTR ? 0 : ready;
}

int server_run(struct server *server, int wake_fd, bool (*on_wake)(void *context),
               void (*late)(void *context, int64_t behind_ns), void *context)
{
	const size_t most = 1 + 2 * server->rig->link_count + SERVER_CLIENTS_MOST;
	struct watch_set set = {
	    .fds = calloc(most, sizeof *set.fds),
	    .watched = calloc(most, sizeof *set.watched),
	};
	int rc = set.fds && set.watched ? 0 : -1;
	bool ended = rc < 0;

	(void)prctl(PR_SET_TIMERSLACK, 1UL); /* a paced line needs it */
	if (server->start_ns < 0)
		server->start_ns = waiting_now();
	while (!ended) {
		int64_t before_ns = waiting_now() - server->start_ns;
		int64_t slept_ns = before_ns - model_now(served_model(server->served));
		(void)server_advance(server);
		if (slept_ns > BEHIND_NS && late && !server->told_late) {
			server->told_late = true;
			late(context, slept_ns);
		}
		collect(server, wake_fd, &set);
		int ready = wait(server, &set);
		if (ready < 0) {
			rc = -1;
			break;
		}
		for (nfds_t i = 0; ready > 0 && i < set.count; i++) {
			if (set.fds[i].revents == 0)
				continue;
			if (set.watched[i].what == WATCH_WAKE)
				ended = on_wake(context);
			else
				serve(server, set.watched[i]);
		}
	}
	free(set.fds);
	free(set.watched);
	return rc;
}
