/* SPDX-License-Identifier: Apache-2.0 */
/* What is said of the scheduler is what was obtained, with rights and without. */
#include "near.h"

#include <sched.h>
#include <string.h>
#include <sys/wait.h>
#include <unistd.h>

#include "realtime.h"

/* In a process of its own, since nothing of this can be taken back. 0: all is as it should be. */
static int said_as_obtained(bool drop_rights)
{
	struct realtime realtime;
	char text[128];
	struct sched_param param;
	int policy = -1;
	if (drop_rights && geteuid() == 0 && setresuid(65534, 65534, 65534) < 0)
		return 1;
	realtime_begin(&realtime);
	realtime_thread(&realtime, pthread_self(), REALTIME_CONDUCTOR_PRIORITY, 0);
	realtime_text(&realtime, text, sizeof text);
	if (pthread_getschedparam(pthread_self(), &policy, &param) != 0)
		return 2;
	if ((policy == SCHED_FIFO) != (strstr(text, "SCHED_FIFO for 1 of 1 threads") != NULL))
		return 3;
	if ((policy != SCHED_FIFO) != (strstr(text, "no SCHED_FIFO: ") != NULL))
		return 4;
	if (!strstr(text, "memory "))
		return 5;
	return realtime.fifo == 1 || realtime.pinned == 0 ? 0 : 6; /* never pinned without it */
}

static int in_a_child(bool drop_rights)
{
	int status = -1;
	pid_t child = fork();
	if (child == 0)
		_exit(said_as_obtained(drop_rights));
	assert_true(child > 0);
	assert_int_equal(waitpid(child, &status, 0), child);
	assert_true(WIFEXITED(status));
	return WEXITSTATUS(status);
}

static void what_was_obtained_is_said(void **state)
{
	(void)state;
	assert_int_equal(in_a_child(false), 0);
}

static void without_rights_it_is_said_and_no_error(void **state)
{
	(void)state;
	assert_int_equal(in_a_child(true), 0);
}

int main(void)
{
	const struct CMUnitTest tests[] = {
	    cmocka_unit_test(what_was_obtained_is_said),
	    cmocka_unit_test(without_rights_it_is_said_and_no_error),
	};
	return RUN_GROUP(tests);
}
