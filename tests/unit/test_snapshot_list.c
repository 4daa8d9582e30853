/*
 * Which folders are snapshots, in which order, and which of them go: the trust's exports, with
 * manifests made by hand.
 */
#include "daemon/snapshot/snapshot_list.h"

#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>

#include <cmocka.h>
#include <fcntl.h>
#include <sys/file.h>
#include <sys/stat.h>
#include <unistd.h>

#include "tests/unit/store_fixture.h"

enum {
    PATH_BYTES = FIXTURE_PATH_BYTES + 128,
    NAMES_BYTES = 512
};

struct exports {
    char parent[FIXTURE_PATH_BYTES];
    char path[FIXTURE_PATH_BYTES + 16];
    struct export_folder *folder;
    struct snapshot_found *list;
    size_t count;
    char error[EXPORT_ERROR_BYTES];
};

static int set_up(void **state)
{
    static struct exports exports;
    exports = (struct exports){0};
    home_make(exports.parent);
    (void)snprintf(exports.path, sizeof exports.path, "%s/exports", exports.parent);
    assert_int_equal(export_folder_open(exports.path, &exports.folder, exports.error), 0);
    *state = &exports;
    return 0;
}

static int tear_down(void **state)
{
    struct exports *exports = *state;
    free(exports->list);
    export_folder_close(exports->folder);
    home_remove(exports->parent);
    return 0;
}

/* --- steps --- */

static const char *at(const struct exports *exports, const char *name)
{
    static char path[PATH_BYTES];
    (void)snprintf(path, sizeof path, "%s/%s", exports->path, name);
    return path;
}

/* A folder with this for its manifest. */
static void make_with(const struct exports *exports, const char *name, const char *manifest)
{
    char path[PATH_BYTES];
    assert_int_equal(mkdir(at(exports, name), 0750), 0);
    (void)snprintf(path, sizeof path, "%s/%s/manifest.json", exports->path, name);
    FILE *file = fopen(path, "w");
    assert_non_null(file);
    assert_true(fputs(manifest, file) >= 0);
    assert_int_equal(fclose(file), 0);
}

/* A snapshot of this hour of a day in 2031. */
static void make(const struct exports *exports, const char *name, unsigned hour, bool is_named)
{
    char manifest[512];
    (void)snprintf(manifest, sizeof manifest,
                   "{\"format\":1,\"name\":\"%s\",\"named\":%s,\"seq\":%u,"
                   "\"at\":\"2031-05-04T%02u:00:00Z\",\"files\":[{\"name\":\"text.json\","
                   "\"bytes\":1000},{\"name\":\"tags.jsonl\",\"bytes\":500}]}",
                   name, is_named ? "true" : "false", 100 + hour, hour);
    make_with(exports, name, manifest);
}

static void point(const struct exports *exports, const char *name)
{
    char error[EXPORT_ERROR_BYTES];
    assert_int_equal(export_folder_point(exports->folder, name, error), 0);
}

/* The names in their order, separated by spaces. */
static const char *names(struct exports *exports)
{
    static char text[NAMES_BYTES];
    text[0] = '\0';
    free(exports->list);
    exports->list = NULL;
    assert_int_equal(
        snapshot_list(exports->folder, &exports->list, &exports->count, exports->error), 0);
    for (size_t i = 0; i < exports->count; i++) {
        size_t used = strlen(text);
        (void)snprintf(text + used, sizeof text - used, "%s%s", i > 0 ? " " : "",
                       exports->list[i].name);
    }
    return text;
}

static size_t thin(struct exports *exports, size_t keep)
{
    size_t removed = 0;
    assert_int_equal(snapshot_thin(exports->folder, keep, &removed, exports->error), 0);
    return removed;
}

/* --- what is one --- */

static void the_oldest_comes_first_whatever_the_names_are(void **state)
{
    struct exports *exports = *state;
    make(exports, "a", 9, false);
    make(exports, "b", 7, false);
    make(exports, "c", 8, false);
    assert_string_equal(names(exports), "b c a");
}

static void its_manifest_says_what_it_is(void **state)
{
    struct exports *exports = *state;
    struct stat status;
    make(exports, "spring", 9, true);
    assert_string_equal(names(exports), "spring");
    assert_int_equal(stat(at(exports, "spring/manifest.json"), &status), 0);
    assert_true(exports->list[0].is_named);
    assert_int_equal(exports->list[0].seq, 109);
    assert_int_equal(exports->list[0].at_ms, INT64_C(1935651600000)); /* date -d 2031-05-04T09Z */
    assert_int_equal(exports->list[0].bytes, 1000 + 500 + status.st_size);
}

static void one_that_was_renamed_is_called_as_its_folder_is(void **state)
{
    struct exports *exports = *state;
    make(exports, "spring", 9, true);
    char old[PATH_BYTES];
    (void)snprintf(old, sizeof old, "%s", at(exports, "spring"));
    assert_int_equal(rename(old, at(exports, "kept")), 0);
    assert_string_equal(names(exports), "kept");
}

static void what_is_no_snapshot_is_passed_over(void **state)
{
    struct exports *exports = *state;
    make(exports, "whole", 9, false);
    make_with(exports, "damaged", "{\"format\":1,");
    make_with(exports, "newer",
              "{\"format\":2,\"name\":\"newer\",\"seq\":1,"
              "\"at\":\"2031-05-04T10:00:00Z\",\"files\":[]}");
    make_with(exports, "timeless", "{\"format\":1,\"name\":\"timeless\",\"seq\":1,\"files\":[]}");
    make_with(exports, "astray",
              "{\"format\":1,\"name\":\"../astray\",\"seq\":1,"
              "\"at\":\"2031-05-04T10:00:00Z\",\"files\":[]}");
    make(exports, ".whole.part", 10, false);
    assert_int_equal(mkdir(at(exports, "empty"), 0750), 0);
    assert_int_equal(symlink("whole", at(exports, "link")), 0);
    assert_int_equal(mknod(at(exports, "file"), S_IFREG | 0640, 0), 0);
    assert_string_equal(names(exports), "whole");
}

/* --- the latest --- */

static void the_latest_is_the_one_that_the_link_leads_to(void **state)
{
    struct exports *exports = *state;
    make(exports, "a", 8, false);
    make(exports, "b", 9, false);
    point(exports, "a");
    assert_string_equal(names(exports), "a b");
    assert_true(exports->list[0].is_latest);
    assert_false(exports->list[1].is_latest);
}

static void without_a_link_or_with_a_strange_one_none_is_the_latest(void **state)
{
    static const char LONG[] = "a234567890123456789012345678901234567890123456789012345678901234567"
                               "89012345678901234567890";
    struct exports *exports = *state;
    make(exports, "a", 8, false);
    (void)names(exports);
    assert_false(exports->list[0].is_latest);
    assert_int_equal(symlink(LONG, at(exports, "latest")), 0);
    (void)names(exports);
    assert_false(exports->list[0].is_latest);
}

/* --- which go --- */

static void the_oldest_go_until_as_many_are_left_as_are_kept(void **state)
{
    struct exports *exports = *state;
    make(exports, "a", 7, false);
    make(exports, "b", 8, false);
    make(exports, "c", 9, false);
    point(exports, "c");
    assert_int_equal(thin(exports, 2), 1);
    assert_string_equal(names(exports), "b c");
    assert_int_equal(thin(exports, 2), 0);
}

static void those_with_a_name_stay_and_do_not_count(void **state)
{
    struct exports *exports = *state;
    make(exports, "spring", 1, true);
    make(exports, "a", 7, false);
    make(exports, "summer", 8, true);
    make(exports, "b", 9, false);
    point(exports, "b");
    assert_int_equal(thin(exports, 1), 1);
    assert_string_equal(names(exports), "spring summer b");
}

static void one_that_is_being_read_stays_until_it_is_not(void **state)
{
    struct exports *exports = *state;
    make(exports, "a", 7, false);
    make(exports, "b", 8, false);
    make(exports, "c", 9, false);
    point(exports, "c");
    int reader = open(at(exports, "a/manifest.json"), O_RDONLY | O_CLOEXEC);
    assert_true(reader >= 0);
    assert_int_equal(flock(reader, LOCK_SH), 0);
    assert_int_equal(thin(exports, 1), 1);
    assert_string_equal(names(exports), "a c");
    assert_int_equal(close(reader), 0);
    assert_int_equal(thin(exports, 1), 1);
    assert_string_equal(names(exports), "c");
}

/* The clock was set back before it was written. */
static void the_latest_stays_even_where_others_look_newer(void **state)
{
    struct exports *exports = *state;
    make(exports, "fresh", 5, false);
    make(exports, "a", 7, false);
    make(exports, "b", 8, false);
    point(exports, "fresh");
    assert_int_equal(thin(exports, 1), 1);
    assert_string_equal(names(exports), "fresh b");
    assert_true(exports->list[0].is_latest);
}

#define TEST(function) cmocka_unit_test_setup_teardown(function, set_up, tear_down)

int main(void)
{
    const struct CMUnitTest tests[] = {
        TEST(the_oldest_comes_first_whatever_the_names_are),
        TEST(its_manifest_says_what_it_is),
        TEST(one_that_was_renamed_is_called_as_its_folder_is),
        TEST(what_is_no_snapshot_is_passed_over),
        TEST(the_latest_is_the_one_that_the_link_leads_to),
        TEST(without_a_link_or_with_a_strange_one_none_is_the_latest),
        TEST(the_oldest_go_until_as_many_are_left_as_are_kept),
        TEST(those_with_a_name_stay_and_do_not_count),
        TEST(one_that_is_being_read_stays_until_it_is_not),
        TEST(the_latest_stays_even_where_others_look_newer),
    };
    return cmocka_run_group_tests(tests, NULL, NULL);
}
