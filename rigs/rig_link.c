/* SPDX-License-Identifier: Apache-2.0 */
/*
 * Links: one wire each. Addresses are taken apart here and never looked up: a
 * rig file must load on a machine that does not see the bench.
 */
#include <stdio.h>
#include <string.h>

#include "rig_loader.h"

enum { TCP_PORT = 502 }; /* registered for Modbus */

static const char *const PARITIES[] = {"none", "even", "odd", NULL}; /* enum link_parity */

struct fields {
	int64_t reply_timeout_ns, baud, stop_bits;
	int parity;
};

/* clang-format off */
static const struct field ROWS[] = {
	{.key = "tcp", .kind = FIELD_OWN, .text = "address of a Modbus TCP server: \"HOST:PORT\""},
	{.key = "rtu", .kind = FIELD_OWN, .text = "path of the serial line of Modbus RTU devices"},
	{.key = "reply_timeout", .kind = FIELD_DURATION, .fallback = "200 ms", .least = 1e6, .most = 60e9,
	 .offset = offsetof(struct fields, reply_timeout_ns), .text = "a reply that is not complete by then is lost"},
	{.key = "baud", .kind = FIELD_INTEGER, .fallback = "19200", .offset = offsetof(struct fields, baud),
	 .text = "of a serial line, bits per second"},
	{.key = "parity", .kind = FIELD_CHOICE, .choices = PARITIES, .fallback = "even",
	 .offset = offsetof(struct fields, parity), .text = "of a serial line"},
	{.key = "stop_bits", .kind = FIELD_INTEGER, .least = 1, .most = 2, .offset = offsetof(struct fields, stop_bits),
	 .text = "of a serial line; 1, or 2 where there is no parity bit"},
};
/* clang-format on */
const struct field_table RIG_LINK_FIELDS = {"link", "one wire", ROWS, FIELD_COUNT(ROWS)};

/* What libmodbus hands to termios; another number would silently become 9600. */
static const int BAUDS[] = {1200,   2400,   4800,   9600,   19200,  38400,  57600,
                            115200, 230400, 460800, 500000, 576000, 921600, 1000000};

static bool is_host(const char *host, size_t length, bool brackets)
{
	if (length == 0 || length > 253)
		return false;
	for (size_t i = 0; i < length; i++) {
		char c = host[i];
		bool letter = (c >= 'a' && c <= 'z') || (c >= 'A' && c <= 'Z') || (c >= '0' && c <= '9');
		if (!letter && !strchr(brackets ? ":.%" : ".-_", c))
			return false;
	}
	return true;
}

/* "127.0.0.1:15020", "[::1]:502", "name:502", each also without the port. */
static int load_tcp(struct rig_loader *loader, const struct yaml_node *node,
                    struct link_config *config)
{
	const char *text;
	if (!bind_text(&loader->binder, node, &text))
		return 0;
	bool brackets = text[0] == '[';
	const char *host = text + brackets;
	const char *end = brackets ? strchr(host, ']') : strchr(host, ':');
	if (!end)
		end = host + strlen(host);
	const char *port = end + (brackets && *end == ']');
	if (!is_host(host, (size_t)(end - host), brackets) || (brackets && *end != ']') ||
	    (*port && *port != ':') || strchr(*port ? port + 1 : port, ':')) {
		rig_fault(loader, node,
		          "this is no address of a TCP server: write \"HOST:PORT\", for IPv6 "
		          "\"[ADDRESS]:PORT\"");
		return 0;
	}
	config->tcp_port = TCP_PORT;
	if (*port) {
		double number = 0;
		if (number_parse(port + 1, strlen(port + 1), &number, NULL) < 0 || number < 1 ||
		    number > 65535 || number != (uint16_t)number) {
			rig_fault(loader, node, "the port must be a number between 1 and 65535");
			return 0;
		}
		config->tcp_port = (uint16_t)number;
	}
	config->tcp_host = arena_strndup(loader->arena, host, (size_t)(end - host));
	return config->tcp_host ? 0 : rig_no_memory(loader);
}

static void load_rtu(struct rig_loader *loader, const struct yaml_node *node,
                     const struct yaml_node *link, const struct fields *fields,
                     struct link_config *config)
{
	const char *path;
	if (!bind_text(&loader->binder, node, &path))
		return;
	if (path[0] != '/') {
		rig_fault(loader, node, "a serial line is a path from the root, such as /dev/ttyUSB0");
		return;
	}
	bool known = false;
	for (size_t i = 0; i < FIELD_COUNT(BAUDS); i++)
		known = known || BAUDS[i] == fields->baud;
	if (!known)
		rig_fault(loader, yaml_get(link, "baud"),
		          "baud: no serial line runs at %lld: use 1200, 2400, 4800, 9600, 19200, 38400, "
		          "57600, 115200, 230400, 460800, 500000, 576000, 921600 or 1000000",
		          (long long)fields->baud);
	config->serial_path = path;
	config->baud = (int)fields->baud;
	config->parity = (enum link_parity)fields->parity;
	/* Modbus over Serial Line V1.02, 2.5.1: without parity two stop bits keep 11 bits. */
	config->stop_bits = fields->stop_bits > 0           ? (int)fields->stop_bits
	                    : fields->parity == PARITY_NONE ? 2
	                                                    : 1;
	for (size_t i = 0; i < loader->rig->link_count; i++) {
		const struct rig_link *other = &loader->rig->links[i];
		if (other->config.serial_path && strcmp(other->config.serial_path, path) == 0)
			rig_fault(loader, node, "the link '%s' is this serial line already", other->name);
	}
}

static int load_link(struct rig_loader *loader, const struct yaml_node *node,
                     struct rig_link *ret_link)
{
	struct fields fields = {0};
	if (!bind_mapping(&loader->binder, &RIG_LINK_FIELDS, node, &fields))
		return 0;
	const struct yaml_node *tcp = yaml_get(node, "tcp"), *rtu = yaml_get(node, "rtu");
	static const char *const SERIAL[] = {"baud", "parity", "stop_bits"};
	ret_link->reply_timeout_ns = ret_link->config.reply_timeout_ns = fields.reply_timeout_ns;
	if (!tcp == !rtu) {
		rig_fault(loader, tcp ? rtu : node, "a link is either tcp or rtu, %s",
		          tcp ? "not both" : "and says the address");
		return 0;
	}
	for (size_t i = 0; tcp && i < FIELD_COUNT(SERIAL); i++)
		if (yaml_get(node, SERIAL[i]))
			rig_fault(loader, yaml_get(node, SERIAL[i]), "%s belongs to a serial line, not to tcp",
			          SERIAL[i]);
	if (tcp)
		return load_tcp(loader, tcp, &ret_link->config);
	load_rtu(loader, rtu, node, &fields, &ret_link->config);
	return 0;
}

int rig_links_load(struct rig_loader *loader, const struct yaml_node *node)
{
	struct rig *rig = loader->rig;
	if (!bind_expect(&loader->binder, node, YAML_MAPPING, "links"))
		return 0;
	rig->links = arena_array(loader->arena, node->count + 1, sizeof *rig->links);
	if (!rig->links)
		return rig_no_memory(loader);
	if (node->count == 0)
		rig_fault(loader, node, "a rig needs at least one link");
	for (size_t i = 0; i < node->count; i++) {
		struct rig_link *link = &rig->links[rig->link_count];
		link->at = node->pairs[i].key->at;
		if (!bind_name(&loader->binder, node->pairs[i].key, &link->name))
			continue;
		if (load_link(loader, node->pairs[i].value, link) < 0)
			return -1;
		rig->link_count++;
	}
	return 0;
}
