/*
 * Homes as earlier versions left them (homes/, made by those versions: six entries, one revised and
 * one withdrawn; from store format 2 on also a ruling and a check): they open with all that was
 * stored, or are refused with a sentence and left as they are.
 */
#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>

#include <cmocka.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <sys/stat.h>
#include <sysexits.h>
#include <zlib.h>

#include "tests/integration/program.h"
#include "tests/integration/service.h"

enum {
    PIECE_BYTES = 65536,
    PATH_BYTES = 2 * UNDERTAGD_PATH_BYTES
};

static struct program_run run;

/* --- fixture: a home that was left -------------------------------------------------------------
 */

static void unpack(const char *name, const char *environment, const char *home)
{
    static unsigned char piece[PIECE_BYTES];
    char path[PATH_BYTES];
    (void)snprintf(path, sizeof path, "tests/integration/homes/%s/%s.mdb.gz", name, environment);
    gzFile packed = gzopen(path, "rb");
    assert_non_null(packed);
    (void)snprintf(path, sizeof path, "%s/%s", home, environment);
    assert_int_equal(mkdir(path, 0700), 0);
    (void)snprintf(path, sizeof path, "%s/%s/data.mdb", home, environment);
    FILE *file = fopen(path, "wb");
    assert_non_null(file);
    int count = 0;
    while ((count = gzread(packed, piece, sizeof piece)) > 0) {
        assert_int_equal(fwrite(piece, 1, (size_t)count, file), count);
    }
    assert_int_equal(count, 0);
    assert_int_equal(gzclose(packed), Z_OK);
    assert_int_equal(fclose(file), 0);
}

static struct service *home_as_left(const char *name)
{
    struct service *service = calloc(1, sizeof *service);
    assert_non_null(service);
    service->peer.fd = -1;
    undertagd_make(&service->daemon);
    assert_int_equal(mkdir(service->daemon.home, 0700), 0);
    unpack(name, "store", service->daemon.home);
    unpack(name, "model", service->daemon.home);
    return service;
}

static int set_up_store_1(void **state)
{
    *state = home_as_left("store-1-model-1");
    return 0;
}

static int set_up_model_2(void **state)
{
    *state = home_as_left("store-2-model-2");
    return 0;
}

static int set_up_model_3(void **state)
{
    *state = home_as_left("store-2-model-3");
    return 0;
}

static int set_up_model_4(void **state)
{
    *state = home_as_left("store-3-model-4");
    return 0;
}

static void start(struct service *service)
{
    undertagd_start(&service->daemon);
    peer_open(&service->peer, service->daemon.socket);
    wait_until_learned(&service->peer);
}

static void verify(const struct service *service, const char *expected)
{
    program_run("undertagd",
                (const char *const[]){"--verify", "--home", service->daemon.home, NULL}, "", &run);
    assert_non_null(strstr(run.output, expected));
}

/* --- tests ------------------------------------------------------------------------------------ */

static void a_store_of_format_1_is_refused_with_a_sentence(void **state)
{
    struct service *service = *state;
    for (int i = 0; i < 2; i++) { /* and stays as it is */
        program_run("undertagd",
                    (const char *const[]){"--home", service->daemon.home, "--socket",
                                          service->daemon.socket, NULL},
                    "", &run);
        assert_int_equal(run.exit_code, EX_NOPERM);
        assert_non_null(strstr(run.error, "the store has format 1, of an early version whose items "
                                          "cannot be taken over: file them again into a new home"));
    }
    verify(service, "the store has format 1");
    assert_int_not_equal(run.exit_code, 0);
}

static void what_was_stored_is_there(void **state)
{
    struct service *service = *state;
    start(service);
    struct peer *peer = &service->peer;
    assert_members(ask(peer, "item.show", "{'id': 'log 5'}"),
                   "{'seq': 7, 'text': 'Bell cracked by frost, a new one sent for',"
                   " 'filed': ['fog bell', 'repair']}");
    assert_error(ask_refused(peer, "item.show", "{'id': 'log 6'}"), -32001, "/id");
    assert_members(ask(peer, "item.show", "{'id': 'log 1'}"),
                   "{'seq': 9, 'belongs': ['lamp'], 'not': ['wreck'],"
                   " 'tags': ['fog', 'fog bell', 'lamp']}");
    assert_members(json_object_get(ask(peer, "item.show", "{'id': 'log 3'}"), "checked"),
                   "{'tags': ['fog', 'tender', 'wreck'], 'drawn': 'random'}");
    assert_members(ask(peer, "tag.show", "{'tag': 'lamp'}"), "{'count': 3}");
}

static void it_goes_on_in_todays_format(void **state)
{
    struct service *service = *state;
    start(service);
    assert_members(
        ask(&service->peer, "item.file", "{'id': 'log 7', 'text': 'fog again', 'tags': ['fog']}"),
        "{'seq': 11}");
    wait_until_learned(&service->peer);
    service_stop_and_start(service);
    verify(service, "store: whole: 6 items, ");
    assert_int_equal(run.exit_code, 0);
    assert_non_null(strstr(run.output, "model: whole: "));
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test_setup_teardown(a_store_of_format_1_is_refused_with_a_sentence,
                                        set_up_store_1, service_tear_down),
        cmocka_unit_test_setup_teardown(what_was_stored_is_there, set_up_model_2,
                                        service_tear_down),
        cmocka_unit_test_setup_teardown(it_goes_on_in_todays_format, set_up_model_2,
                                        service_tear_down),
        cmocka_unit_test_setup_teardown(what_was_stored_is_there, set_up_model_3,
                                        service_tear_down),
        cmocka_unit_test_setup_teardown(it_goes_on_in_todays_format, set_up_model_3,
                                        service_tear_down),
        cmocka_unit_test_setup_teardown(what_was_stored_is_there, set_up_model_4,
                                        service_tear_down),
        cmocka_unit_test_setup_teardown(it_goes_on_in_todays_format, set_up_model_4,
                                        service_tear_down),
    };
    return cmocka_run_group_tests_name("earlier formats", tests, NULL, NULL);
}
