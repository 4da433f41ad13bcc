/* SPDX-License-Identifier: Apache-2.0 */
#ifndef DRIVETRIAL_TCP_DIAL_H
#define DRIVETRIAL_TCP_DIAL_H
/* How both Modbus TCP backends get a connection. */
#include <netdb.h>

#include "link.h"
#include "waiting.h"

/*
 * Connects to the first address that takes it, within the timeout. Returns a
 * non-blocking descriptor, or -1 with errno; ECANCELED: broken off by `waking`.
 */
int tcp_dial(const struct waking *waking, const struct addrinfo *addresses, int64_t timeout_ns);

/* Looks a name up; *ret_addresses is for freeaddrinfo(). shown: the address, for the message. */
int tcp_resolve(const struct link_config *config, const char *shown,
                struct addrinfo **ret_addresses, struct err *reterr);

#endif
