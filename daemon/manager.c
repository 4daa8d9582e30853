#include "daemon/manager.h"

#include <errno.h>
#include <stdio.h>
#include <string.h>
#include <sys/socket.h>
#include <systemd/sd-daemon.h>

#include "daemon/clock.h"

/* In all of these, nobody may be listening. */

void manager_ready(void)
{
    (void)sd_notify(0, "READY=1");
}

void manager_reloading(void)
{
    (void)sd_notifyf(0, "RELOADING=1\nMONOTONIC_USEC=%llu", (unsigned long long)clock_steady_us());
}

void manager_stopping(void)
{
    (void)sd_notify(0, "STOPPING=1");
}

void manager_alive(void)
{
    (void)sd_notify(0, "WATCHDOG=1");
}

uint64_t manager_alive_within_us(void)
{
    uint64_t within_us = 0;
    return sd_watchdog_enabled(0, &within_us) > 0 ? within_us : 0;
}

int manager_take_socket(int *ret_fd, char *error)
{
    int count = sd_listen_fds(1);
    if (count < 0) {
        (void)snprintf(error, MANAGER_ERROR_BYTES, "the sockets passed in cannot be taken: %s",
                       strerror(-count));
        return count;
    }
    if (count > 1) {
        (void)snprintf(error, MANAGER_ERROR_BYTES, "%d sockets were passed in, and one is wanted",
                       count);
        return -EINVAL;
    }
    if (count == 1 && sd_is_socket_unix(SD_LISTEN_FDS_START, SOCK_STREAM, 1, NULL, 0) <= 0) {
        (void)snprintf(error, MANAGER_ERROR_BYTES,
                       "what was passed in is not a Unix stream socket that listens (see "
                       "ListenStream= in systemd.socket)");
        return -EINVAL;
    }
    *ret_fd = count == 1 ? SD_LISTEN_FDS_START : 0;
    return 0;
}
