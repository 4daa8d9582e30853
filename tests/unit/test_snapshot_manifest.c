/*
 * manifest.json: written of the files in a part, and read back. The sums are those of NIST's
 * example for FIPS 180 ("abc") and of no bytes (sha256sum /dev/null, GNU coreutils).
 */
#include "daemon/snapshot/snapshot_manifest.h"

#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>

#include <cmocka.h>

#include "tests/unit/exports_fixture.h"

static const char EMPTY[] = "e3b0c44298fc1c149afbf4c8996fb92427ae41e4649b934ca495991b7852b855";
static const char ABC[] = "ba7816bf8f01cfea414140de5dae2223b00361a396177a9cb410ff61f20015ad";

/* Of two files, at 2031-05-04T10:00:00.250Z. Returns what all take. */
static uint64_t write_manifest(struct exports *exports, bool is_named)
{
    struct options options;
    struct propensity_fit fit;
    const struct propensity_curve curve = {.a = .55, .b = 1.5};
    uint64_t bytes = 0;
    options_defaults(&options);
    propensity_fit_default(&curve, &fit);
    const struct snapshot_manifest manifest = {
        .name = "spring",
        .is_named = is_named,
        .seq = 1911,
        .at_ms = INT64_C(1935655200250), /* date -d 2031-05-04T10Z, and a quarter */
        .counts = {.items = 7, .tags = 6, .words = 5, .weights = 4},
        .learning = &options,
        .fit = &fit};
    exports_add(exports, "tags.jsonl", "abc", 3);
    exports_add(exports, "standing.json", "", 0);
    int code =
        snapshot_manifest_write(exports->part, &manifest, &exports->pace, &bytes, &exports->error);
    if (code != STORE_OK) {
        fail_msg("%d: %s", code, exports->error.text);
    }
    return bytes;
}

static json_t *read_json(struct exports *exports)
{
    size_t size = 0;
    unsigned char *bytes = exports_bytes(exports, SNAPSHOT_MANIFEST, &size);
    json_t *manifest = json_loadb((const char *)bytes, size, JSON_REJECT_DUPLICATES, NULL);
    assert_non_null(manifest);
    free(bytes);
    return manifest;
}

static void it_says_what_the_snapshot_is_of(void **state)
{
    struct exports *exports = *state;
    (void)write_manifest(exports, true);
    json_t *manifest = read_json(exports);
    json_t *expected =
        json_pack("{s:i, s:s, s:b, s:i, s:s, s:{s:i, s:i, s:i, s:i}}", "format", 1, "name",
                  "spring", "named", 1, "seq", 1911, "at", "2031-05-04T10:00:00.250Z", "counts",
                  "items", 7, "tags", 6, "words", 5, "weights", 4);
    const char *member;
    json_t *value;
    json_object_foreach(expected, member, value)
    {
        if (!json_equal(json_object_get(manifest, member), value)) {
            fail_msg("%s", member);
        }
    }
    json_decref(expected);
    json_decref(manifest);
}

static void it_says_what_was_learned_with(void **state)
{
    struct exports *exports = *state;
    (void)write_manifest(exports, true);
    json_t *manifest = read_json(exports);
    const json_t *settings = json_object_get(manifest, "settings");
    const json_t *curve = json_object_get(manifest, "propensity");
    assert_string_equal(json_string_value(json_object_get(settings, "loss")), "squared_hinge");
    assert_true(json_number_value(json_object_get(curve, "a")) == .55);
    assert_true(json_number_value(json_object_get(curve, "b")) == 1.5);
    assert_true(json_is_false(json_object_get(curve, "fitted")));
    json_decref(manifest);
}

static void it_has_all_files_by_name_with_their_sums(void **state)
{
    struct exports *exports = *state;
    (void)write_manifest(exports, true);
    json_t *manifest = read_json(exports);
    json_t *expected =
        json_pack("[{s:s, s:i, s:s}, {s:s, s:i, s:s}]", "name", "standing.json", "bytes", 0,
                  "sha256", EMPTY, "name", "tags.jsonl", "bytes", 3, "sha256", ABC);
    assert_true(json_equal(json_object_get(manifest, "files"), expected));
    json_decref(expected);
    json_decref(manifest);
}

static void its_own_bytes_count_in(void **state)
{
    struct exports *exports = *state;
    size_t size = 0;
    uint64_t bytes = write_manifest(exports, true);
    free(exports_bytes(exports, SNAPSHOT_MANIFEST, &size));
    assert_int_equal(bytes, 3 + 0 + size);
}

/* --- reading one --- */

static int read_back(struct exports *exports, struct snapshot_found *ret_found)
{
    int fd = openat(export_part_fd(exports->part), SNAPSHOT_MANIFEST, O_RDONLY | O_CLOEXEC);
    FILE *stream = fdopen(fd, "r");
    assert_non_null(stream);
    int result = snapshot_manifest_read(stream, ret_found);
    assert_int_equal(fclose(stream), 0);
    return result;
}

static void what_is_read_back_is_what_was_written(void **state)
{
    for (int is_named = 0; is_named < 2; is_named++) {
        struct exports *exports = *state;
        struct snapshot_found found;
        uint64_t bytes = write_manifest(exports, is_named);
        assert_int_equal(read_back(exports, &found), 0);
        assert_string_equal(found.name, "spring");
        assert_int_equal(found.is_named, is_named);
        assert_int_equal(found.seq, 1911);
        assert_int_equal(found.at_ms, INT64_C(1935655200250));
        assert_int_equal(found.bytes, bytes);
        assert_int_equal(exports_tear_down(state), 0);
        assert_int_equal(exports_set_up(state), 0);
    }
}

static void what_is_no_manifest_of_this_format_is_refused(void **state)
{
#define REST "\"seq\":7,\"at\":\"2031-05-04T10:00:00Z\",\"files\":[]}"
    static const char *const BAD[] = {
        "",
        "[]",
        "{}",
        "{\"format\":1,\"name\":\"spring\"," REST "x",
        "{\"format\":0,\"name\":\"spring\"," REST,
        "{\"format\":2,\"name\":\"spring\"," REST,
        "{\"format\":\"1\",\"name\":\"spring\"," REST,
        "{\"name\":\"spring\"," REST,
        "{\"format\":1," REST,
        "{\"format\":1,\"name\":\"../spring\"," REST,
        "{\"format\":1,\"name\":7," REST,
        "{\"format\":1,\"name\":\"spring\",\"seq\":\"7\",\"at\":\"2031-05-04T10:00:00Z\","
        "\"files\":[]}",
        "{\"format\":1,\"name\":\"spring\",\"seq\":7,\"at\":\"at dawn\",\"files\":[]}",
        "{\"format\":1,\"name\":\"spring\",\"seq\":7,\"at\":\"2031-05-04T10:00:00Z\"}",
        "{\"format\":1,\"format\":1,\"name\":\"spring\"," REST};
#undef REST
    (void)state;
    for (size_t i = 0; i < sizeof BAD / sizeof BAD[0]; i++) {
        struct snapshot_found found = {.seq = 1911};
        FILE *stream = tmpfile();
        assert_non_null(stream);
        assert_true(fputs(BAD[i], stream) >= 0);
        rewind(stream);
        if (snapshot_manifest_read(stream, &found) == 0) {
            fail_msg("taken: %s", BAD[i]);
        }
        assert_int_equal(found.seq, 1911); /* as it was */
        assert_int_equal(fclose(stream), 0);
    }
}

#define TEST(function) cmocka_unit_test_setup_teardown(function, exports_set_up, exports_tear_down)

int main(void)
{
    const struct CMUnitTest tests[] = {
        TEST(it_says_what_the_snapshot_is_of),
        TEST(it_says_what_was_learned_with),
        TEST(it_has_all_files_by_name_with_their_sums),
        TEST(its_own_bytes_count_in),
        TEST(what_is_read_back_is_what_was_written),
        cmocka_unit_test(what_is_no_manifest_of_this_format_is_refused),
    };
    return cmocka_run_group_tests(tests, NULL, NULL);
}
