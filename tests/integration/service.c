#include "tests/integration/service.h"

#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>

#include <cmocka.h>
#include <stdlib.h>

struct service *service_new(const char *first, const char *second, const char *third)
{
    struct service *service = calloc(1, sizeof *service);
    assert_non_null(service);
    undertagd_make(&service->daemon);
    service->daemon.settings[0] = first;
    service->daemon.settings[1] = second;
    service->daemon.settings[2] = third;
    undertagd_start(&service->daemon);
    peer_open(&service->peer, service->daemon.socket);
    return service;
}

int service_set_up(void **state)
{
    *state = service_new(NULL, NULL, NULL);
    return 0;
}

int service_tear_down(void **state)
{
    struct service *service = *state;
    peer_close(&service->peer);
    int result = undertagd_remove(&service->daemon);
    free(service);
    return result;
}

void service_restart(struct service *service)
{
    peer_close(&service->peer);
    undertagd_start(&service->daemon);
    peer_open(&service->peer, service->daemon.socket);
}

void service_stop_and_start(struct service *service)
{
    assert_int_equal(undertagd_stop(&service->daemon), 0);
    service_restart(service);
}
