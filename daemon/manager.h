/*
 * manager: what the system's manager of services is told, and the socket that it may have opened
 * for us (sd_notify(3), sd_watchdog_enabled(3), sd_listen_fds(3)). Without such a manager all of it
 * does nothing. Loop thread, or before there is a loop.
 */
#ifndef UNDERTAG_MANAGER_H
#define UNDERTAG_MANAGER_H

#include <stdint.h>

void manager_ready(void);
void manager_reloading(void); /* until manager_ready */
void manager_stopping(void);

/* The daemon is alive. */
void manager_alive(void);

/* How often manager_alive must be called at least, in microseconds; 0: it need not be. */
uint64_t manager_alive_within_us(void);

enum {
    MANAGER_ERROR_BYTES = 256
};

/*
 * The socket that the manager has opened for us; 0: none. Returns 0, or a negative errno with a
 * sentence in `error` where there is more than one, or one that is not a Unix stream socket that
 * listens. The caller closes it. To be called once.
 */
int manager_take_socket(int *ret_fd, char *error) __attribute__((warn_unused_result));

#endif
