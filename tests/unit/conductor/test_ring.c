/* SPDX-License-Identifier: Apache-2.0 */
/* The bounded queue between two threads. */
#include <pthread.h>
#include <sched.h>

#include "near.h"
#include "ring.h"

static void gives_back_in_order_and_refuses_when_full(void **state)
{
	(void)state;
	struct ring ring;
	assert_int_equal(ring_init(&ring, sizeof(int), 16, NULL), 0);
	assert_null(ring_front(&ring));
	for (int i = 0; i < 16; i++)
		assert_true(ring_push(&ring, &i, sizeof i));
	int more = 99;
	assert_false(ring_push(&ring, &more, sizeof more));
	for (int i = 0; i < 16; i++) {
		assert_int_equal(*(const int *)ring_front(&ring), i);
		ring_pop(&ring);
	}
	assert_null(ring_front(&ring));
	ring_release(&ring);
}

static void refuses_what_is_larger_than_an_element(void **state)
{
	(void)state;
	struct ring ring;
	char large[64] = {0};
	assert_int_equal(ring_init(&ring, 16, 16, NULL), 0);
	assert_false(ring_push(&ring, large, sizeof large));
	ring_release(&ring);
}

enum { MANY = 200000 };

static void *push_many(void *context)
{
	for (long i = 0; i < MANY;) {
		if (ring_push(context, &i, sizeof i))
			i++;
		else
			(void)sched_yield();
	}
	return NULL;
}

static void loses_nothing_between_two_threads(void **state)
{
	(void)state;
	struct ring ring;
	pthread_t thread;
	assert_int_equal(ring_init(&ring, sizeof(long), 64, NULL), 0);
	assert_int_equal(pthread_create(&thread, NULL, push_many, &ring), 0);
	long expected = 0, wrong = 0;
	while (expected < MANY) {
		const long *front = ring_front(&ring);
		if (!front) {
			(void)sched_yield();
			continue;
		}
		wrong += *front != expected++;
		ring_pop(&ring);
	}
	assert_int_equal(pthread_join(thread, NULL), 0);
	assert_int_equal(wrong, 0);
	ring_release(&ring);
}

int main(void)
{
	const struct CMUnitTest tests[] = {
	    cmocka_unit_test(gives_back_in_order_and_refuses_when_full),
	    cmocka_unit_test(refuses_what_is_larger_than_an_element),
	    cmocka_unit_test(loses_nothing_between_two_threads),
	};
	return RUN_GROUP(tests);
}
