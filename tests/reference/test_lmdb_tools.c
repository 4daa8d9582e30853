/*
 * LMDB's own tools, mdb_stat and mdb_dump (Debian package lmdb-utils), open and walk a home of
 * ours and find the entries that were put there, also after scrubbing.
 */
#include <setjmp.h>
#include <stdarg.h>
#include <stdbool.h>
#include <stddef.h>
#include <stdint.h>

#include <cmocka.h>

#include "storage/model_store.h"
#include "tests/unit/store_fixture.h"

enum {
    COMMAND_BYTES = FIXTURE_PATH_BYTES + 128,
    OUTPUT_BYTES = 1 << 20
};

/* Runs a tool; its output is valid until the next. NULL when it is not here. */
static const char *output_of(const char *tool, const char *arguments, const char *home,
                             const char *environment)
{
    static char output[OUTPUT_BYTES];
    char command[COMMAND_BYTES];
    (void)snprintf(command, sizeof command, "command -v %s >/dev/null || exit 127; %s %s '%s/%s'",
                   tool, tool, arguments, home, environment);
    FILE *pipe = popen(command, "r"); /* NOLINT(cert-env33-c): a fixed command of our own */
    assert_non_null(pipe);
    size_t size = fread(output, 1, sizeof output - 1, pipe);
    output[size] = '\0';
    int status = pclose(pipe);
    if (WIFEXITED(status) && WEXITSTATUS(status) == 127) {
        (void)fprintf(stderr, "skipped: %s is not here (Debian package lmdb-utils)\n", tool);
        return NULL;
    }
    assert_int_equal(status, 0);
    return output;
}

/* "Status of ids\n … Entries: 3\n" as mdb_stat -a has it; -1 where there is no such table. */
static long entries(const char *statistics, const char *table)
{
    char heading[64];
    (void)snprintf(heading, sizeof heading, "Status of %s\n", table);
    const char *part = strstr(statistics, heading);
    const char *line = part ? strstr(part, "Entries: ") : NULL;
    return line ? strtol(line + strlen("Entries: "), NULL, 10) : -1;
}

/* A dump's lines of data begin with a space; an entry has two: key and value. */
static long dumped_entries(const char *dump)
{
    long lines = 0;
    for (const char *at = dump; (at = strstr(at, "\n ")); at++) {
        lines++;
    }
    return lines / 2;
}

/* Seqs 1 to 5: three entries with the tags fog and gale, one revised, one withdrawn. */
static void file_five(struct fixture *fixture)
{
    const struct names both = {.tags = {"fog", "gale"}};
    static const char *const ids[] = {"log/1", "log/2", "log/3"};
    for (size_t i = 0; i < 3; i++) {
        struct item_filing filing = {.id = text_of(ids[i]), .text = text_of("a quiet night")};
        (void)fixture_file_as(fixture, filing, both);
    }
    (void)fixture_file_text(fixture, "log/1", "fog after midnight");
    (void)fixture_withdraw(fixture, "log/2");
}

static void the_tools_count_the_entries_of_the_store(void **state)
{
    struct fixture *fixture = *state;
    file_five(fixture);
    fixture_close(fixture);
    const char *statistics = output_of("mdb_stat", "-a", fixture->home, "store");
    if (!statistics) {
        skip();
    }
    assert_int_equal(entries(statistics, "Main DB"), 6); /* tables */
    assert_int_equal(entries(statistics, "meta"), 1);
    assert_int_equal(entries(statistics, "ids"), 3);
    assert_int_equal(entries(statistics, "records"), 5); /* a short record is one piece */
    assert_int_equal(entries(statistics, "superseded"), 2);
    assert_int_equal(entries(statistics, "tags"), 2);
    assert_int_equal(entries(statistics, "tag_names"), 2);
}

static void the_tools_dump_the_entries_of_the_store(void **state)
{
    struct fixture *fixture = *state;
    file_five(fixture);
    fixture_close(fixture);
    const char *dump = output_of("mdb_dump", "-p -s tag_names", fixture->home, "store");
    if (!dump) {
        skip();
    }
    /* With -p what can be printed is printed; numbers are four bytes, the high one first, and a
     * proof follows. */
    assert_non_null(strstr(dump, "\n fog\n \\00\\00\\00\\00"));
    assert_non_null(strstr(dump, "\n gale\n \\00\\00\\00\\01"));
    assert_int_equal(dumped_entries(dump), 2);
    dump = output_of("mdb_dump", "-s records", fixture->home, "store");
    assert_non_null(dump);
    assert_int_equal(dumped_entries(dump), 5);
}

static void the_tools_read_beside_an_open_store(void **state)
{
    struct fixture *fixture = *state;
    file_five(fixture);
    const char *statistics = output_of("mdb_stat", "-a", fixture->home, "store");
    if (!statistics) {
        skip();
    }
    assert_int_equal(entries(statistics, "records"), 5);
    assert_int_equal(fixture_file_text(fixture, "log/4", "calm").seq, 6);
}

/* Enough that pages are freed and tables have branches; then every second entry goes. */
static void erase_half_of_many(struct fixture *fixture, int count)
{
    char id[32];
    uint64_t seq = 0;
    for (int i = 0; i < count; i++) {
        (void)snprintf(id, sizeof id, "log/%d", i);
        (void)fixture_file_text(fixture, id, "lamp lit at dusk, wind south west, two ketches");
    }
    for (int i = 0; i < count; i += 2) {
        (void)snprintf(id, sizeof id, "log/%d", i);
        seq = fixture_withdraw(fixture, id);
    }
    while (fixture_erase(fixture, seq) > 0) {
    }
    size_t left = 1;
    struct store_error error = {0};
    while (left > 0) {
        assert_int_equal(store_scrub(fixture->store, 32, &left, &error), STORE_OK);
    }
}

static void the_tools_walk_a_scrubbed_store(void **state)
{
    struct fixture *fixture = *state;
    enum {
        COUNT = 300
    };
    erase_half_of_many(fixture, COUNT);
    fixture_close(fixture);
    const char *statistics = output_of("mdb_stat", "-a", fixture->home, "store");
    if (!statistics) {
        skip();
    }
    assert_int_equal(entries(statistics, "ids"), COUNT);
    /* 300 filings and 150 withdrawals; the 150 withdrawn filings are erased. */
    assert_int_equal(entries(statistics, "records"), COUNT);
    assert_int_equal(entries(statistics, "superseded"), 0);
    const char *dump = output_of("mdb_dump", "-a", fixture->home, "store");
    assert_non_null(dump);
    /* meta, ids, records; neither tags nor anything superseded. */
    assert_int_equal(dumped_entries(dump), 1 + 2 * COUNT);
}

static void put_model(struct model_store *model)
{
    struct store_error error = {0};
    struct model_store_writing *writing = NULL;
    struct model_store_head head = {.learned = 5};
    struct model_store_word words[] = {{"fog", 3, 0, 2}, {"gale", 4, 1, 1}};
    static const float values[] = {-0.25F, 0.125F};
    const uint32_t tag = 0;
    const float score = 0.5F;
    struct model_store_chunk chunk = {.bytes = kv_bytes_of("fog's", 5)};
    struct model_store_entry entry = {
        .number = 5, .gaps = {1, &tag, &score}, .pairs = {1, &tag, values}};
    assert_int_equal(model_store_begin(model, &writing, &error), STORE_OK);
    assert_int_equal(model_store_put_head(writing, &head, &error), STORE_OK);
    assert_int_equal(model_store_put_word(writing, &words[0], &error), STORE_OK);
    assert_int_equal(model_store_put_word(writing, &words[1], &error), STORE_OK);
    assert_int_equal(model_store_put_chunk(writing, &chunk, &error), STORE_OK);
    assert_int_equal(model_store_put_entry(writing, &entry, &error), STORE_OK);
    assert_int_equal(model_store_commit(writing, &error), STORE_OK);
}

static void the_tools_count_the_entries_of_the_model(void **state)
{
    struct fixture *fixture = *state;
    struct store_error error = {0};
    struct model_store *model = NULL;
    assert_int_equal(model_store_open(&fixture->settings, &model, &error), STORE_OK);
    put_model(model);
    model_store_close(model);
    const char *statistics = output_of("mdb_stat", "-a", fixture->home, "model");
    if (!statistics) {
        skip();
    }
    assert_int_equal(entries(statistics, "Main DB"), 8); /* tables */
    assert_int_equal(entries(statistics, "meta"), 1);
    assert_int_equal(entries(statistics, "words"), 2);
    assert_int_equal(entries(statistics, "chunks"), 1);
    assert_int_equal(entries(statistics, "tags"), 0);
    assert_int_equal(entries(statistics, "figures"), 0);
    assert_int_equal(entries(statistics, "worklist"), 1);
    assert_int_equal(entries(statistics, "counts"), 1); /* of both words */
    assert_int_equal(entries(statistics, "news"), 0);
}

#define TEST(name) cmocka_unit_test_setup_teardown(name, fixture_setup, fixture_teardown)

int main(void)
{
    const struct CMUnitTest tests[] = {
        TEST(the_tools_count_the_entries_of_the_store),
        TEST(the_tools_dump_the_entries_of_the_store),
        TEST(the_tools_read_beside_an_open_store),
        TEST(the_tools_walk_a_scrubbed_store),
        TEST(the_tools_count_the_entries_of_the_model),
    };
    return cmocka_run_group_tests_name("LMDB's tools", tests, NULL, NULL);
}
