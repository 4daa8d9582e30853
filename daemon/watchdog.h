/*
 * watchdog: tells the system's manager that the daemon is alive, where the manager wants to know,
 * at twice the rate that it asks for: from the loop, and only while the writer, the trainer and the
 * storer have moved since the last time or wait for work. So when one of the four hangs the daemon
 * is started again. Loop thread only.
 */
#ifndef UNDERTAG_WATCHDOG_H
#define UNDERTAG_WATCHDOG_H

#include <uv.h>

#include "daemon/heartbeat.h"

/* Private. */
struct watchdog {
    uv_timer_t timer;
    const struct heartbeat *heartbeat;
    struct heartbeat_watch watch;
};

/* Begins, in memory of the caller's. It is then open, whether the manager wants to know or not. The
 * heartbeat is borrowed until watchdog_close. */
void watchdog_start(struct watchdog *watchdog, uv_loop_t *loop, const struct heartbeat *heartbeat);

/* Closes it; the memory is in use until the loop has turned. */
void watchdog_close(struct watchdog *watchdog);

#endif
