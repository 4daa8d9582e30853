/*
 * snapshot.write and snapshot.list: what is in the folder, as somebody finds it who knows nothing
 * of the daemon.
 */
#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>

#include <cmocka.h>
#include <fcntl.h>
#include <stdio.h>
#include <string.h>
#include <sys/stat.h>
#include <unistd.h>

#include "tests/integration/logbook.h"
#include "tests/integration/snapshots.h"

enum {
    ENTRIES = 300,
    WORDS = 12
};

/* A daemon that has learned 300 entries. */
static int set_up(void **state)
{
    struct service *service = service_new(NULL, NULL, NULL);
    logbook_file(&service->peer, 0, ENTRIES, WORDS);
    *state = service;
    return 0;
}

static json_t *write_named(struct service *service, const char *name)
{
    return ask(&service->peer, "snapshot.write", "{'name': '%s'}", name);
}

/* The tags of the entries below `end`: every third has one, the others two. */
static json_int_t given_below(json_int_t end)
{
    json_int_t count = 0;
    for (json_int_t number = 0; number < end; number++) {
        count += number % 3 == 0 ? 1 : 2;
    }
    return count;
}

static json_int_t sum_of(const json_t *list, const char *member)
{
    size_t i;
    json_t *entry;
    json_int_t sum = 0;
    json_array_foreach(list, i, entry)
    {
        sum += whole(entry, member);
    }
    return sum;
}

/* --- what is there ------------------------------------------------------------------------------
 */

static void it_is_a_folder_of_these_files(void **state)
{
    struct service *service = *state;
    (void)write_named(service, "spring");
    assert_string_equal(snapshots_names(service, "spring"),
                        "calibration.json manifest.json proposals.jsonl standing.json tags.jsonl "
                        "text.json weights.npz weights_data.npy weights_indices.npy "
                        "weights_indptr.npy words.jsonl");
    assert_string_equal(snapshots_names(service, ""), "latest spring");
}

static void items_come_where_they_are_asked_for_and_proposals_unless_they_are_not(void **state)
{
    struct service *service = *state;
    (void)ask(&service->peer, "snapshot.write",
              "{'name': 'spring', 'items': true, 'proposals': false}");
    assert_string_equal(snapshots_names(service, "spring"),
                        "calibration.json items.jsonl manifest.json standing.json tags.jsonl "
                        "text.json weights.npz weights_data.npy weights_indices.npy "
                        "weights_indptr.npy words.jsonl");
}

static void the_manifest_names_all_files_but_itself(void **state)
{
    struct service *service = *state;
    char listed[1024] = "";
    size_t i;
    json_t *file;
    (void)write_named(service, "spring");
    json_array_foreach(json_object_get(snapshots_read(service, "spring/manifest.json"), "files"), i,
                       file)
    {
        size_t used = strlen(listed);
        (void)snprintf(listed + used, sizeof listed - used, "%s%s", i > 0 ? " " : "",
                       string(file, "name"));
    }
    assert_string_equal(listed, "calibration.json proposals.jsonl standing.json tags.jsonl "
                                "text.json weights.npz weights_data.npy weights_indices.npy "
                                "weights_indptr.npy words.jsonl");
}

/* By sha256sum, of the GNU coreutils. */
static void the_manifest_has_the_sums_of_all_files(void **state)
{
    struct service *service = *state;
    size_t i;
    json_t *file;
    (void)ask(&service->peer, "snapshot.write", "{'name': 'spring', 'items': true}");
    const json_t *files = json_object_get(snapshots_read(service, "spring/manifest.json"), "files");
    json_array_foreach(files, i, file)
    {
        char command[SNAPSHOTS_PATH_BYTES + 64];
        char sum[65] = "";
        struct stat status;
        (void)snprintf(command, sizeof command, "sha256sum %s/%s",
                       snapshots_path(service, "spring"), string(file, "name"));
        assert_int_equal(stat(command + strlen("sha256sum "), &status), 0);
        assert_int_equal(whole(file, "bytes"), status.st_size);
        FILE *output = popen(command, "re"); /* NOLINT(cert-env33-c): the path is ours */
        assert_non_null(output);
        assert_int_equal(fread(sum, 1, 64, output), 64);
        assert_int_equal(pclose(output), 0);
        assert_string_equal(string(file, "sha256"), sum);
    }
}

static void the_answer_says_what_was_written(void **state)
{
    struct service *service = *state;
    struct stat status;
    const json_t *written = write_named(service, "spring");
    const json_t *manifest = snapshots_read(service, "spring/manifest.json");
    assert_string_equal(string(written, "name"), "spring");
    assert_string_equal(string(written, "path"), snapshots_path(service, "spring"));
    assert_int_equal(whole(written, "seq"), ENTRIES);
    assert_int_equal(whole(manifest, "seq"), ENTRIES);
    assert_int_equal(stat(snapshots_path(service, "spring/manifest.json"), &status), 0);
    assert_int_equal(whole(written, "bytes"),
                     sum_of(json_object_get(manifest, "files"), "bytes") + status.st_size);
}

/* 20310504T100000Z-300 */
static void without_a_name_it_is_called_by_time_and_change(void **state)
{
    struct service *service = *state;
    unsigned date = 0;
    unsigned time = 0;
    unsigned seq = 0;
    char end = 0;
    const char *name = string(ask(&service->peer, "snapshot.write", "{}"), "name");
    assert_int_equal(sscanf(name, "%8uT%6uZ-%u%c", &date, &time, &seq, &end), 3);
    assert_int_equal(seq, ENTRIES);
    assert_true(snapshots_have(service, name));
}

static void all_is_readable_for_the_daemon_s_group_alone(void **state)
{
    struct service *service = *state;
    struct stat status;
    (void)write_named(service, "spring");
    assert_int_equal(stat(snapshots_path(service, "spring"), &status), 0);
    assert_int_equal(status.st_mode & 07777, 0750);
    assert_int_equal(stat(snapshots_path(service, "spring/weights.npz"), &status), 0);
    assert_int_equal(status.st_mode & 07777, 0640);
    assert_int_equal(stat(snapshots_path(service, "spring/tags.jsonl"), &status), 0);
    assert_int_equal(status.st_mode & 07777, 0640);
}

/* --- what is in it ------------------------------------------------------------------------------
 */

static void every_document_and_every_line_is_json(void **state)
{
    static const char *const DOCUMENTS[] = {"text.json", "standing.json", "calibration.json"};
    static const char *const LINES[] = {"tags.jsonl", "words.jsonl", "items.jsonl",
                                        "proposals.jsonl"};
    struct service *service = *state;
    char name[64];
    (void)ask(&service->peer, "snapshot.write", "{'name': 'spring', 'items': true, 'floor': 0}");
    for (size_t i = 0; i < sizeof DOCUMENTS / sizeof DOCUMENTS[0]; i++) {
        (void)snprintf(name, sizeof name, "spring/%s", DOCUMENTS[i]);
        assert_true(json_is_object(snapshots_read(service, name)));
    }
    for (size_t i = 0; i < sizeof LINES / sizeof LINES[0]; i++) {
        (void)snprintf(name, sizeof name, "spring/%s", LINES[i]);
        assert_true(json_array_size(snapshots_read_lines(service, name)) > 0);
    }
}

static void the_manifest_counts_what_the_files_hold(void **state)
{
    struct service *service = *state;
    (void)ask(&service->peer, "snapshot.write", "{'name': 'spring', 'items': true}");
    const json_t *counts =
        json_object_get(snapshots_read(service, "spring/manifest.json"), "counts");
    assert_int_equal(whole(counts, "items"), ENTRIES);
    assert_int_equal(json_array_size(snapshots_read_lines(service, "spring/items.jsonl")), ENTRIES);
    assert_int_equal(json_array_size(snapshots_read_lines(service, "spring/tags.jsonl")),
                     whole(counts, "tags"));
    assert_int_equal(json_array_size(snapshots_read_lines(service, "spring/words.jsonl")),
                     whole(counts, "words"));
}

/* NumPy Enhancement Proposal 1: 6 bytes of magic, 2 of version, 2 of the header's length, and a
 * header that ends on a multiple of 16 (here on 128); then the numbers, and nothing else. */
static void assert_array(struct service *service, const char *name, const char *type,
                         json_int_t count, size_t number_bytes)
{
    char header[129] = "";
    char expected[128];
    struct stat status;
    int length = snprintf(expected, sizeof expected,
                          "{'descr': '%s', 'fortran_order': False, 'shape': (%lld,), }", type,
                          (long long)count);
    int fd = open(snapshots_path(service, name), O_RDONLY | O_CLOEXEC);
    assert_true(fd >= 0 && length > 0);
    assert_int_equal(fstat(fd, &status), 0);
    assert_int_equal(read(fd, header, 128), 128);
    assert_int_equal(close(fd), 0);
    assert_memory_equal(header, "\x93NUMPY\x01\x00\x76\x00", 10); /* 118 bytes follow */
    assert_memory_equal(header + 10, expected, (size_t)length);
    assert_int_equal(strspn(header + 10 + length, " "), 117 - length);
    assert_int_equal(header[127], '\n');
    assert_int_equal(status.st_size, 128 + count * (json_int_t)number_bytes);
}

static void the_arrays_have_the_sizes_that_the_counts_say(void **state)
{
    struct service *service = *state;
    (void)write_named(service, "spring");
    const json_t *counts =
        json_object_get(snapshots_read(service, "spring/manifest.json"), "counts");
    json_int_t weights = whole(counts, "weights");
    assert_true(weights > 0);
    assert_array(service, "spring/weights_data.npy", "<f4", weights, 4);
    assert_array(service, "spring/weights_indices.npy", "<i4", weights, 4);
    assert_array(service, "spring/weights_indptr.npy", "<i4", whole(counts, "tags") + 1, 4);
}

/* An id, and the gaps above the floor, the likeliest first; their sum is what is expected. */
static void proposals_are_above_the_floor_and_fall(void **state)
{
    struct service *service = *state;
    size_t i;
    json_t *line;
    (void)ask(&service->peer, "snapshot.write", "{'name': 'spring', 'floor': 0.1}");
    json_array_foreach(snapshots_read_lines(service, "spring/proposals.jsonl"), i, line)
    {
        double before = 1.0;
        double sum = 0.0;
        size_t at;
        json_t *gap;
        (void)ask(&service->peer, "item.show", "{'id': '%s'}", string(line, "id"));
        json_array_foreach(json_object_get(line, "gaps"), at, gap)
        {
            double chance = number(gap, "chance");
            assert_true(chance >= 0.1 && chance <= before);
            before = chance;
            sum += chance;
        }
        assert_true(at > 0);
        assert_true(sum > number(line, "expected") - 1e-6 && sum < number(line, "expected") + 1e-6);
    }
    assert_true(i > 0);
}

/* --- names --------------------------------------------------------------------------------------
 */

static void what_may_be_no_name_is_refused(void **state)
{
    static const char *const BAD[] = {"",           ".",        "..",    "../spring", "a/b",
                                      "/tmp/a",     ".hidden",  "-rf",   "latest",    "a b",
                                      "fog\\u00e9", "a\\u0001", "a\\nb", "spring/"};
    struct service *service = *state;
    for (size_t i = 0; i < sizeof BAD / sizeof BAD[0]; i++) {
        assert_error(ask_refused(&service->peer, "snapshot.write", "{'name': '%s'}", BAD[i]),
                     -32602, "/name");
    }
    assert_error(ask_refused(&service->peer, "snapshot.write", "{'name': '%065d'}", 7), -32602,
                 "/name");
    assert_false(snapshots_have(service, ""));
}

static void a_name_of_64_bytes_is_taken(void **state)
{
    struct service *service = *state;
    const json_t *written = ask(&service->peer, "snapshot.write", "{'name': '%064d'}", 7);
    assert_int_equal(strlen(string(written, "name")), 64);
}

static void a_name_that_is_taken_is_refused_and_nothing_changes(void **state)
{
    struct service *service = *state;
    struct stat before;
    struct stat after;
    (void)write_named(service, "spring");
    assert_int_equal(stat(snapshots_path(service, "spring/manifest.json"), &before), 0);
    assert_error(ask_refused(&service->peer, "snapshot.write", "{'name': 'spring'}"), -32602,
                 "/name");
    assert_int_equal(stat(snapshots_path(service, "spring/manifest.json"), &after), 0);
    assert_int_equal(before.st_ino, after.st_ino);
    assert_string_equal(snapshots_names(service, ""), "latest spring");
    assert_json(json_object_get(ask(&service->peer, "daemon.state", "{}"), "faults"), "[]");
}

static void what_is_no_flag_no_share_and_too_slow_is_refused(void **state)
{
    static const struct {
        const char *params;
        const char *field;
    } BAD[] = {{"{'items': 1}", "/items"},     {"{'floor': 1.5}", "/floor"},
               {"{'rate': 1048575}", "/rate"}, {"{'proposals': null}", "/proposals"},
               {"{'speed': 7}", "/speed"},     {"{'name': 7}", "/name"}};
    struct service *service = *state;
    for (size_t i = 0; i < sizeof BAD / sizeof BAD[0]; i++) {
        assert_error(ask_refused(&service->peer, "snapshot.write", "%s", BAD[i].params), -32602,
                     BAD[i].field);
    }
}

/* --- the list -----------------------------------------------------------------------------------
 */

static void there_are_none_before_the_first(void **state)
{
    struct service *service = *state;
    assert_json(ask(&service->peer, "snapshot.list", "{}"), "{'snapshots': []}");
    assert_false(snapshots_have(service, "")); /* the folder is not made for looking */
}

static void they_are_listed_oldest_first_and_the_latest_is_told(void **state)
{
    struct service *service = *state;
    const json_t *second = NULL;
    (void)write_named(service, "zebra");
    second = write_named(service, "ant");
    assert_string_equal(snapshots_listed(service), "zebra ant");
    const json_t *list = json_object_get(ask(&service->peer, "snapshot.list", "{}"), "snapshots");
    assert_members(json_array_get(list, 0), "{'name': 'zebra', 'named': true, 'latest': false}");
    assert_members(json_array_get(list, 1), "{'name': 'ant', 'named': true, 'latest': true}");
    assert_string_equal(string(json_array_get(list, 1), "path"), string(second, "path"));
    assert_int_equal(whole(json_array_get(list, 1), "bytes"), whole(second, "bytes"));
    assert_string_equal(snapshots_latest(service), "ant");
}

static void an_empty_home_has_nothing_to_write(void **state)
{
    struct service *service = *state;
    assert_error(ask_refused(&service->peer, "snapshot.write", "{}"), -32001, "");
    assert_string_equal(snapshots_names(service, ""), "");
    assert_json(json_object_get(ask(&service->peer, "daemon.state", "{}"), "faults"), "[]");
}

/* --- of one moment ------------------------------------------------------------------------------
 */

/* Entries are filed before, while and after it begins; whatever its change is, all is of that. */
static void it_is_of_one_change_whatever_is_filed_meanwhile(void **state)
{
    struct service *service = *state;
    struct peer writer;
    peer_open(&writer, service->daemon.socket);
    unsigned id = peer_request(&writer, "snapshot.write", "{'name': 'spring', 'items': true}");
    for (unsigned first = ENTRIES; !peer_has_something(&writer); first += 50) {
        logbook_file(&service->peer, first, 50, WORDS);
    }
    json_int_t seq = whole(peer_result(&writer, id), "seq");
    peer_close(&writer);
    assert_true(seq >= ENTRIES);
    assert_int_equal(whole(snapshots_read(service, "spring/manifest.json"), "seq"), seq);
    assert_int_equal(sum_of(snapshots_read_lines(service, "spring/tags.jsonl"), "count"),
                     given_below(seq));
    assert_int_equal(json_array_size(snapshots_read_lines(service, "spring/items.jsonl")), seq);
    assert_int_equal(whole(snapshots_read(service, "spring/text.json"), "documents"), seq);
}

/* What was counted before it began is what it has. */
static void its_tags_count_what_the_list_of_tags_said(void **state)
{
    struct service *service = *state;
    size_t i;
    json_t *tag;
    (void)write_named(service, "spring");
    json_array_foreach(snapshots_read_lines(service, "spring/tags.jsonl"), i, tag)
    {
        assert_int_equal(
            whole(ask(&service->peer, "tag.show", "{'tag': '%s'}", string(tag, "tag")), "count"),
            whole(tag, "count"));
    }
}

#define TEST(function) cmocka_unit_test_setup_teardown(function, set_up, service_tear_down)

int main(void)
{
    const struct CMUnitTest tests[] = {
        TEST(it_is_a_folder_of_these_files),
        TEST(items_come_where_they_are_asked_for_and_proposals_unless_they_are_not),
        TEST(the_manifest_names_all_files_but_itself),
        TEST(the_manifest_has_the_sums_of_all_files),
        TEST(the_answer_says_what_was_written),
        TEST(without_a_name_it_is_called_by_time_and_change),
        TEST(all_is_readable_for_the_daemon_s_group_alone),
        TEST(every_document_and_every_line_is_json),
        TEST(the_manifest_counts_what_the_files_hold),
        TEST(the_arrays_have_the_sizes_that_the_counts_say),
        TEST(proposals_are_above_the_floor_and_fall),
        TEST(what_may_be_no_name_is_refused),
        TEST(a_name_of_64_bytes_is_taken),
        TEST(a_name_that_is_taken_is_refused_and_nothing_changes),
        TEST(what_is_no_flag_no_share_and_too_slow_is_refused),
        TEST(there_are_none_before_the_first),
        TEST(they_are_listed_oldest_first_and_the_latest_is_told),
        TEST(it_is_of_one_change_whatever_is_filed_meanwhile),
        TEST(its_tags_count_what_the_list_of_tags_said),
        cmocka_unit_test_setup_teardown(an_empty_home_has_nothing_to_write, service_set_up,
                                        service_tear_down),
    };
    return cmocka_run_group_tests(tests, NULL, NULL);
}
