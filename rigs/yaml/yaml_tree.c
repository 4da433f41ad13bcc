/* SPDX-License-Identifier: Apache-2.0 */
/*
 * libyaml's events become a tree with positions. Its own document loader was
 * rejected: it resolves aliases, accepts duplicate keys, and has no limit of
 * depth. Nesting is counted while events arrive, so that a file of opening
 * brackets ends after 64 of them. Bytes are looked through first (see
 * yaml_bytes.c), because libyaml gives no line for a bad one.
 */
#include "yaml_tree.h"

#include <stdlib.h>
#include <string.h>
#include <yaml.h>

#include "yaml_reading.h"

const char *yaml_kind_name(enum yaml_kind kind)
{
	switch (kind) {
	case YAML_SCALAR:
		return "text";
	case YAML_SEQUENCE:
		return "a list";
	case YAML_MAPPING:
		return "a mapping";
	}
	return "nothing";
}

struct yaml_node *yaml_get(const struct yaml_node *mapping, const char *key)
{
	if (!mapping || mapping->kind != YAML_MAPPING)
		return NULL;
	size_t length = strlen(key);
	for (size_t i = 0; i < mapping->count; i++) {
		const struct yaml_node *node = mapping->pairs[i].key;
		if (node->length == length && memcmp(node->text, key, length) == 0)
			return mapping->pairs[i].value;
	}
	return NULL;
}

/* What is read, and where to. A function that returns false ends the reading. */
struct reader {
	yaml_parser_t parser;
	const struct yaml_file *file;
	struct arena *arena;
	struct faults *faults;
	struct err *reterr;
	int depth;
	bool out_of_memory;
};

/* Children are chained while their number is unknown, then become an array. */
struct chain {
	struct chain *next;
	struct yaml_node *key, *value;
};

static struct position at_mark(const struct reader *reader, yaml_mark_t mark)
{
	return (struct position){reader->file, (int)mark.line + 1, (int)mark.column + 1};
}

static bool no_memory(struct reader *reader)
{
	reader->out_of_memory = true;
	return false;
}

static bool next_event(struct reader *reader, yaml_event_t *ret_event)
{
	if (yaml_parser_parse(&reader->parser, ret_event))
		return true;
	if (reader->parser.error == YAML_MEMORY_ERROR)
		return no_memory(reader);
	const yaml_parser_t *parser = &reader->parser;
	yaml_explain(
	    &(struct yaml_problem){
	        .problem = parser->problem ? parser->problem : "",
	        .context = parser->context ? parser->context : "",
	        .at = at_mark(reader, parser->problem_mark),
	        .context_at = at_mark(reader, parser->context_mark),
	    },
	    reader->faults);
	return false;
}

/* Anchors and tags are refused, and reading goes on without them. */
static void refuse_properties(struct reader *reader, const yaml_event_t *event,
                              const yaml_char_t *anchor, const yaml_char_t *tag)
{
	char shown[YAML_SHOWN];
	struct position at = at_mark(reader, event->start_mark);
	if (anchor)
		faults_add(reader->faults, at,
		           "an anchor '&%s' is not allowed: write the value out where it is used",
		           yaml_shown((const char *)anchor, strlen((const char *)anchor), shown));
	if (!tag)
		return;
	static const char CORE[] = "tag:yaml.org,2002:"; /* what `!!` stands for */
	const char *name = (const char *)tag;
	bool core = strncmp(name, CORE, sizeof CORE - 1) == 0;
	if (core)
		name += sizeof CORE - 1;
	faults_add(reader->faults, at,
	           "a tag '%s%s' is not allowed: the key says what kind of value it takes",
	           core ? "!!" : "", yaml_shown(name, strlen(name), shown));
}

static struct yaml_node *new_node(struct reader *reader, enum yaml_kind kind, yaml_mark_t mark)
{
	struct yaml_node *node = arena_alloc(reader->arena, sizeof *node);
	if (!node) {
		(void)no_memory(reader);
		return NULL;
	}
	node->kind = kind;
	node->at = at_mark(reader, mark);
	return node;
}

static bool read_scalar(struct reader *reader, const yaml_event_t *event,
                        struct yaml_node **ret_node)
{
	refuse_properties(reader, event, event->data.scalar.anchor, event->data.scalar.tag);
	struct yaml_node *node = new_node(reader, YAML_SCALAR, event->start_mark);
	if (!node)
		return false;
	node->length = event->data.scalar.length;
	node->quoted = event->data.scalar.style != YAML_PLAIN_SCALAR_STYLE;
	node->text = arena_strndup(reader->arena, (const char *)event->data.scalar.value, node->length);
	if (!node->text)
		return no_memory(reader);
	if (memchr(node->text, '\0', node->length))
		faults_add(reader->faults, node->at, "the text holds a NUL character (\\0): remove it");
	*ret_node = node;
	return true;
}

static bool read_node(struct reader *reader, const yaml_event_t *event,
                      struct yaml_node **ret_node);

static void check_key(struct reader *reader, const struct yaml_node *key)
{
	if (key->kind != YAML_SCALAR)
		faults_add(reader->faults, key->at, "a key must be a name, not %s",
		           yaml_kind_name(key->kind));
	else if (key->length == 2 && memcmp(key->text, "<<", 2) == 0 && !key->quoted)
		faults_add(reader->faults, key->at, "a merge key '<<' is not allowed: write the keys out");
	else if (key->length == 0)
		faults_add(reader->faults, key->at, "a key is missing here");
}

static int by_key(const void *a, const void *b)
{
	const struct yaml_pair *const *p = a, *const *q = b;
	const struct yaml_node *s = (*p)->key, *t = (*q)->key;
	if (s->length != t->length)
		return s->length < t->length ? -1 : 1;
	int order = memcmp(s->text, t->text, s->length);
	if (order != 0)
		return order;
	return *p < *q ? -1 : *p > *q;
}

/* Sorted, since a file may hold 100,000 keys and comparing all pairs takes minutes. */
static bool refuse_duplicates(struct reader *reader, const struct yaml_node *mapping)
{
	struct yaml_pair **sorted = arena_array(reader->arena, mapping->count + 1, sizeof *sorted);
	if (!sorted)
		return no_memory(reader);
	size_t count = 0;
	for (size_t i = 0; i < mapping->count; i++)
		if (mapping->pairs[i].key->kind == YAML_SCALAR)
			sorted[count++] = &mapping->pairs[i];
	qsort(sorted, count, sizeof *sorted, by_key);
	size_t first = 0; /* of the run of equal keys */
	for (size_t i = 1; i < count; i++) {
		const struct yaml_node *key = sorted[i]->key, *old = sorted[first]->key;
		char shown[YAML_SHOWN];
		if (key->length == old->length && memcmp(key->text, old->text, key->length) == 0)
			faults_add(reader->faults, key->at,
			           "the key '%s' stands here a second time; the first is in line %d",
			           yaml_shown(key->text, key->length, shown), old->at.line);
		else
			first = i;
	}
	return true;
}

static bool chain_to_node(struct reader *reader, struct chain *chain, struct yaml_node *node)
{
	bool is_mapping = node->kind == YAML_MAPPING;
	size_t size = is_mapping ? sizeof *node->pairs : sizeof(struct yaml_node *);
	void *array = arena_array(reader->arena, node->count + 1, size);
	if (!array)
		return no_memory(reader);
	if (!is_mapping)
		node->items = array;
	else
		node->pairs = array;
	for (size_t i = 0; chain; chain = chain->next, i++)
		if (is_mapping)
			node->pairs[i] = (struct yaml_pair){chain->key, chain->value};
		else
			node->items[i] = chain->value;
	return !is_mapping || refuse_duplicates(reader, node);
}

/* Reads children up to the end event of the collection. */
static bool read_children(struct reader *reader, struct yaml_node *node)
{
	yaml_event_type_t stop =
	    node->kind == YAML_MAPPING ? YAML_MAPPING_END_EVENT : YAML_SEQUENCE_END_EVENT;
	struct chain *first = NULL, **last = &first;
	struct yaml_node *key = NULL;
	for (;;) {
		yaml_event_t event;
		if (!next_event(reader, &event))
			return false;
		if (event.type == stop) {
			yaml_event_delete(&event);
			return chain_to_node(reader, first, node);
		}
		struct yaml_node *child = NULL;
		bool good = read_node(reader, &event, &child);
		yaml_event_delete(&event);
		if (!good)
			return false;
		if (node->kind == YAML_MAPPING && !key) {
			check_key(reader, child);
			key = child;
			continue;
		}
		struct chain *link = arena_alloc(reader->arena, sizeof *link);
		if (!link)
			return no_memory(reader);
		*link = (struct chain){.key = key, .value = child};
		*last = link;
		last = &link->next;
		node->count++;
		key = NULL;
	}
}

static bool read_collection(struct reader *reader, const yaml_event_t *event, enum yaml_kind kind,
                            struct yaml_node **ret_node)
{
	if (kind == YAML_MAPPING)
		refuse_properties(reader, event, event->data.mapping_start.anchor,
		                  event->data.mapping_start.tag);
	else
		refuse_properties(reader, event, event->data.sequence_start.anchor,
		                  event->data.sequence_start.tag);
	if (reader->depth == YAML_DEPTH_MOST) {
		faults_add(reader->faults, at_mark(reader, event->start_mark),
		           "nested deeper than %d levels: nothing in these files is", YAML_DEPTH_MOST);
		return false;
	}
	*ret_node = new_node(reader, kind, event->start_mark);
	if (!*ret_node)
		return false;
	reader->depth++;
	bool good = read_children(reader, *ret_node);
	reader->depth--;
	return good;
}

static bool read_alias(struct reader *reader, const yaml_event_t *event,
                       struct yaml_node **ret_node)
{
	char shown[YAML_SHOWN];
	const char *name = (const char *)event->data.alias.anchor;
	faults_add(reader->faults, at_mark(reader, event->start_mark),
	           "an alias '*%s' is not allowed: write the value out, or use `values:` in a suite",
	           yaml_shown(name, strlen(name), shown));
	*ret_node = new_node(reader, YAML_SCALAR, event->start_mark);
	if (!*ret_node)
		return false;
	(*ret_node)->text = "";
	(*ret_node)->quoted = true;
	return true;
}

static bool read_node(struct reader *reader, const yaml_event_t *event, struct yaml_node **ret_node)
{
	switch (event->type) {
	case YAML_SCALAR_EVENT:
		return read_scalar(reader, event, ret_node);
	case YAML_SEQUENCE_START_EVENT:
		return read_collection(reader, event, YAML_SEQUENCE, ret_node);
	case YAML_MAPPING_START_EVENT:
		return read_collection(reader, event, YAML_MAPPING, ret_node);
	case YAML_ALIAS_EVENT:
		return read_alias(reader, event, ret_node);
	default:
		faults_add(reader->faults, at_mark(reader, event->start_mark),
		           "the file ends where a value is expected");
		return false;
	}
}

/* One event outside of the tree; *ret_more false at the end of the stream. */
static bool read_outer(struct reader *reader, const yaml_event_t *event, int *documents,
                       struct yaml_node **ret_root, bool *ret_more)
{
	switch (event->type) {
	case YAML_STREAM_START_EVENT:
	case YAML_DOCUMENT_END_EVENT:
		return true;
	case YAML_STREAM_END_EVENT:
		*ret_more = false;
		return true;
	case YAML_DOCUMENT_START_EVENT:
		if (++*documents > 1) {
			faults_add(reader->faults, at_mark(reader, event->start_mark),
			           "a second document begins here: one file holds one");
			return false;
		}
		if (event->data.document_start.tag_directives.start !=
		    event->data.document_start.tag_directives.end)
			faults_add(reader->faults, at_mark(reader, event->start_mark),
			           "a %%TAG directive is not allowed: tags are not used");
		return true;
	default:
		return read_node(reader, event, ret_root);
	}
}

static void read_stream(struct reader *reader, struct yaml_node **ret_root)
{
	int documents = 0;
	bool more = true;
	while (more) {
		yaml_event_t event;
		if (!next_event(reader, &event))
			return;
		bool good = read_outer(reader, &event, &documents, ret_root, &more);
		yaml_event_delete(&event);
		if (!good)
			return;
	}
	if (documents == 0)
		faults_add(reader->faults, (struct position){reader->file, 1, 1}, "the file is empty");
}

static struct yaml_file *new_file(const char *path, const char *bytes, size_t length,
                                  struct arena *arena)
{
	struct yaml_file *file = arena_alloc(arena, sizeof *file);
	if (!file)
		return NULL;
	if (length >= 3 && memcmp(bytes, "\xEF\xBB\xBF", 3) == 0) { /* byte order mark */
		bytes += 3;
		length -= 3;
	}
	file->path = arena_strdup(arena, path);
	file->bytes = arena_strndup(arena, bytes, length);
	file->length = length;
	return file->path && file->bytes ? file : NULL;
}

int yaml_load_bytes(const char *path, const char *bytes, size_t length, struct arena *arena,
                    struct faults *faults, const struct yaml_file **ret_file,
                    struct yaml_node **ret_root, struct err *reterr)
{
	*ret_root = NULL;
	if (length > YAML_BYTES_MOST)
		return err_set_at(reterr, ERR_FILE, path, 0, 0,
		                  "the file is larger than 1 MiB; rig and suite files are not");
	struct yaml_file *file = new_file(path, bytes, length, arena);
	if (!file)
		return err_set_at(reterr, ERR_NOMEM, path, 0, 0, "memory ran out while reading");
	*ret_file = file;
	size_t before = faults_total(faults);
	if (!yaml_bytes_check(file, faults))
		return 0;
	struct reader reader = {.file = file, .arena = arena, .faults = faults, .reterr = reterr};
	if (!yaml_parser_initialize(&reader.parser))
		return err_set_at(reterr, ERR_NOMEM, path, 0, 0, "memory ran out while reading");
	yaml_parser_set_encoding(&reader.parser, YAML_UTF8_ENCODING);
	yaml_parser_set_input_string(&reader.parser, (const unsigned char *)file->bytes, file->length);
	struct yaml_node *root = NULL;
	read_stream(&reader, &root);
	yaml_parser_delete(&reader.parser);
	if (reader.out_of_memory)
		return err_set_at(reterr, ERR_NOMEM, path, 0, 0, "memory ran out while reading");
	if (faults_total(faults) == before)
		*ret_root = root;
	return 0;
}
