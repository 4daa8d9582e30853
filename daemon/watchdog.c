#include "daemon/watchdog.h"

#include <assert.h>

#include "daemon/log.h"
#include "daemon/manager.h"

static void on_due(uv_timer_t *timer)
{
    struct watchdog *watchdog = timer->data;
    enum heart still = heartbeat_look(watchdog->heartbeat, &watchdog->watch);
    if (still == HEART_COUNT) {
        manager_alive();
    } else {
        log_line(LOG_TROUBLE, "%s stands still; the system's watchdog is not told that we live",
                 heartbeat_name(still));
    }
}

void watchdog_start(struct watchdog *watchdog, uv_loop_t *loop, const struct heartbeat *heartbeat)
{
    *watchdog = (struct watchdog){.heartbeat = heartbeat};
    int code = uv_timer_init(loop, &watchdog->timer);
    assert(code == 0); /* libuv documents no failure */
    watchdog->timer.data = watchdog;
    uint64_t within_us = manager_alive_within_us();
    if (within_us > 0) {
        uint64_t every_ms = within_us >= 2000 ? within_us / 2000 : 1;
        code = uv_timer_start(&watchdog->timer, on_due, every_ms, every_ms);
        assert(code == 0); /* fails only without a callback */
    }
}

void watchdog_close(struct watchdog *watchdog)
{
    uv_close((uv_handle_t *)&watchdog->timer, NULL);
}
