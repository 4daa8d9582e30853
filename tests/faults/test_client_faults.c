/*
 * The client while one call of the system fails: its n-th malloc, write, sync or open, n = 0, 1, 2
 * ... until there is none left. It ends by itself, with what it always says or with a code and one
 * sentence; what it said in full was right, and a page that it writes is the old one or the new.
 *
 * `make test` takes every 7th malloc, from another one for each command; UNDERTAG_FAULTS=all, or
 * `make faults`, all of them. The answers are those of a real daemon, given by a stand-in.
 */
#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>

#include <cmocka.h>
#include <dirent.h>
#include <fcntl.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <sysexits.h>
#include <unistd.h>

#include "tests/faults/patient.h"
#include "tests/faults/sites.h"
#include "tests/integration/every_command.h"

enum {
    STRIDE = 7,
    WRONG_MOST = 20 /* then it is given up: one fault shows often */
};

static const char OLD_PAGE[] = "the page of last year\n";

struct patient_client {
    struct every_command *all;
    struct patient shim; /* no daemon of its own: what the shim is told by */
    char preload[CHILD_PATH_BYTES + 16];
    char control[CHILD_PATH_BYTES];
    unsigned failed[FAIL_KINDS]; /* calls that were */
    unsigned wrong;              /* what did not hold */
};

static struct program_run run;

static bool takes_all(void)
{
    const char *text = getenv("UNDERTAG_FAULTS");
    return text && strcmp(text, "all") == 0;
}

/* --- what must hold -------------------------------------------------------------------------- */

__attribute__((format(printf, 3, 4))) static void
wrong(struct patient_client *client, const struct played *played, const char *format, ...)
{
    const struct fail_control *control = client->shim.control;
    char what[1024];
    char site[SITE_BYTES] = "nothing";
    va_list list;
    va_start(list, format);
    (void)vsnprintf(what, sizeof what, format, list); /* a long one is cut */
    va_end(list);
    if (atomic_load(&control->is_injected)) {
        site_describe(control, site);
    }
    print_error("WRONG: %s, failed %s: %s; it ended with %d: %s\n", played_name(played), site, what,
                run.exit_code, run.error);
    client->wrong++;
}

static bool says_one_sentence(void)
{
    const char *end = strchr(run.error, '\n');
    return strncmp(run.error, "undertag: ", 10) == 0 && end && end[1] == '\0';
}

/* How it ended, and what it said. */
static void look_at_end(struct patient_client *client, const struct played *played, bool is_memory)
{
    if (run.exit_code == 0) {
        if (strcmp(run.output, played->output) != 0 || *run.error) {
            wrong(client, played, "it says that all went well, and printed: %s", run.output);
        }
        return;
    }
    if (run.exit_code < EX__BASE || run.exit_code > EX__MAX || !says_one_sentence()) {
        wrong(client, played, "no sentence, or no code");
    } else if (is_memory && run.exit_code != EX_OSERR) {
        wrong(client, played, "it does not say that there is no memory");
    }
}

static bool writes_page(const struct played *played)
{
    const char *const *arguments = played->command->arguments;
    return strcmp(arguments[0], "report") == 0 ||
           (strcmp(arguments[0], "--json") == 0 && strcmp(arguments[1], "report") == 0);
}

static char *read_page(const struct every_command *all)
{
    char *text = NULL;
    size_t size = 0;
    FILE *file = fopen(all->page, "re");
    assert_non_null(file);
    assert_true(getdelim(&text, &size, '\0', file) > 0);
    assert_int_equal(fclose(file), 0);
    return text;
}

/* The page is the old one or whole, and whole where the command that writes it says so; there is no
 * third file. */
static void look_at_page(struct patient_client *client, const struct played *played)
{
    char *page = read_page(client->all);
    bool is_old = strcmp(page, OLD_PAGE) == 0;
    bool is_whole = strncmp(page, "<!DOCTYPE html>", 15) == 0 && strstr(page, "</html>\n");
    if (writes_page(played) && run.exit_code == 0 ? !is_whole : !is_old && !is_whole) {
        wrong(client, played, "the page is neither the old one nor whole");
    }
    free(page);
    DIR *folder = opendir(client->all->daemon.folder);
    assert_non_null(folder);
    for (const struct dirent *entry = readdir(folder); entry; entry = readdir(folder)) {
        if (strncmp(entry->d_name, "page.html.", 10) == 0) {
            wrong(client, played, "%s was left behind", entry->d_name);
        }
    }
    assert_int_equal(closedir(folder), 0);
}

/* --- one run --------------------------------------------------------------------------------- */

/* With the n-th call of the kind failed; false: there were not so many. */
static bool play(struct patient_client *client, struct played *played, enum fail_kind kind,
                 unsigned n)
{
    struct every_command *all = client->all;
    const char *const environment[] = {client->preload, client->control, NULL};
    undertagd_write(&all->daemon, "page.html", OLD_PAGE);
    stand_in_repeat(&all->stand_in, &played->rehearsal);
    patient_arm(&client->shim, kind, n);
    every_command_run(all, played, &(struct program_way){.environment = environment}, &run);
    if (!patient_disarm(&client->shim)) {
        return false;
    }
    client->failed[kind]++;
    look_at_end(client, played, kind == FAIL_MALLOC);
    look_at_page(client, played);
    return true;
}

static void play_all(struct patient_client *client, enum fail_kind kind, unsigned stride)
{
    for (size_t i = 0; i < client->all->count && client->wrong < WRONG_MOST; i++) {
        struct played *played = &client->all->played[i];
        unsigned n = (unsigned)i % stride;
        while (client->wrong < WRONG_MOST && play(client, played, kind, n)) {
            n += stride;
        }
    }
    if (client->wrong > 0) {
        fail_msg("%u times something did not hold", client->wrong);
    }
}

/* --- the tests ------------------------------------------------------------------------------- */

static void without_memory_it_says_so_or_goes_on(void **state)
{
    struct patient_client *client = *state;
    play_all(client, FAIL_MALLOC, takes_all() ? 1 : STRIDE);
    assert_true(client->failed[FAIL_MALLOC] > 500);
}

static void a_page_that_cannot_be_written_leaves_the_old_one(void **state)
{
    struct patient_client *client = *state;
    play_all(client, FAIL_WRITE, 1);
    play_all(client, FAIL_WRITE_BADLY, 1);
    play_all(client, FAIL_SYNC, 1);
    assert_true(client->failed[FAIL_WRITE] > 0 && client->failed[FAIL_WRITE_BADLY] > 0);
    assert_true(client->failed[FAIL_SYNC] > 0);
}

static void a_file_that_cannot_be_opened_is_told(void **state)
{
    struct patient_client *client = *state;
    play_all(client, FAIL_OPEN, 1);
    assert_true(client->failed[FAIL_OPEN] > 0);
}

static int set_up(void **state)
{
    struct patient_client *client = calloc(1, sizeof *client);
    void *all = NULL;
    assert_non_null(client);
    assert_int_equal(every_command_set_up(&all), 0);
    client->all = all;
    patient_make(&client->shim);
    (void)snprintf(client->preload, sizeof client->preload, "LD_PRELOAD=");
    child_program("tests/fail_nth.so", client->preload + strlen(client->preload));
    (void)snprintf(client->control, sizeof client->control, "%s=%s", FAIL_CONTROL_VARIABLE,
                   client->shim.control_path);
    *state = client;
    return 0;
}

static int tear_down(void **state)
{
    struct patient_client *client = *state;
    void *all = client->all;
    for (enum fail_kind kind = 0; kind < FAIL_KINDS; kind++) {
        print_message("%s: %u calls failed\n", fail_kind_title(kind), client->failed[kind]);
    }
    patient_remove(&client->shim);
    free(client);
    return every_command_tear_down(&all);
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(without_memory_it_says_so_or_goes_on),
        cmocka_unit_test(a_page_that_cannot_be_written_leaves_the_old_one),
        cmocka_unit_test(a_file_that_cannot_be_opened_is_told),
    };
    return !patient_is_possible() ? 0 : cmocka_run_group_tests(tests, set_up, tear_down);
}
