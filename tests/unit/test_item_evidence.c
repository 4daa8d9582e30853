/*
 * The evidence of an item in its record: what was said is read again, also after a restart; a
 * record that was damaged under a right checksum (a bug, or a hand at the file) is told from a
 * whole one, and never leads a reader beyond its end.
 */
#include <setjmp.h>
#include <stdarg.h>
#include <stdbool.h>
#include <stddef.h>
#include <stdint.h>

#include <cmocka.h>

#include "storage/items_private.h"
#include "storage/store_private.h"
#include "tests/unit/repeatable.h"
#include "tests/unit/store_fixture.h"

static const char ID[] = "log/1911-02-03";

/* --- a record with everything --- */

/*
 * Opens fog 0, gale 1, wreck 2, bell 3, lamp 4, horn 5, quay 6 and says all that can be said.
 * Seqs: 1 opens wreck, bell, lamp; 2 filed, 3 ruled, 4 tagged again, 5 checked, 6 filed again,
 * 7 ruled, 8 tagged again.
 */
static void say_everything(struct fixture *fixture)
{
    struct item_filing filing = {.id = text_of(ID),
                                 .title = text_of("Night watch"),
                                 .text = text_of("fog from the west"),
                                 .fields = text_of("{\"station\":\"Far Skerry\"}"),
                                 .language = text_of("en"),
                                 .tagger = text_of("m.quill"),
                                 .filed_at = text_of("1911-02-03T04:00:00Z"),
                                 .stored_at_ms = -5000,
                                 .uid = 1007};
    struct item_saying ruling = {
        .id = text_of(ID), .who = text_of("e.ditor"), .at_ms = -4000, .uid = 1008};
    struct item_saying check = {
        .id = text_of(ID), .who = text_of("c.lerk"), .at_ms = 3000, .uid = 1009};
    struct item_saying second = {
        .id = text_of(ID), .who = text_of("o.reed"), .at_ms = 4000, .uid = 1010};
    struct item_saying third = {
        .id = text_of(ID), .who = text_of("p.inner"), .at_ms = 5000, .uid = 1011};
    (void)fixture_file_as(fixture, (struct item_filing){.id = text_of("log/2")},
                          (struct names){.tags = {"fog", "gale", "wreck", "bell", "lamp"}});
    (void)fixture_file_as(fixture, filing, (struct names){{"fog", "gale"}, {"gale"}, {"wreck"}});
    (void)fixture_rule(fixture, ruling, (struct rulings){{"bell"}, {"lamp"}});
    (void)fixture_tag_again(fixture, second, "1911-02-04T09:00:00Z", true,
                            (struct names){.tags = {"fog", "horn"}});
    (void)fixture_check(fixture, check, true, (struct names){.tags = {"horn", "bell", "fog"}});
    filing.stored_at_ms = -2000;
    (void)fixture_file_as(fixture, filing, (struct names){{"fog", "quay"}, {"quay"}, {"wreck"}});
    ruling.who = text_of("");
    ruling.at_ms = -1000;
    ruling.uid = 1012;
    (void)fixture_rule(fixture, ruling, (struct rulings){.denied = {"quay"}});
    (void)fixture_tag_again(fixture, third, "", true, (struct names){.tags = {NULL}});
}

static void assert_ruling(const struct item_ruling *ruling, uint32_t tag, bool belongs,
                          int64_t at_ms, const char *editor)
{
    assert_int_equal(ruling->tag, tag);
    assert_int_equal(ruling->belongs, belongs);
    assert_true(ruling->at_ms == at_ms);
    assert_true(is_text(ruling->editor, editor));
}

static void assert_filing(struct fixture *fixture)
{
    struct item_record record = fixture_item(fixture, ID);
    assert_int_equal(record.seq, 8);
    assert_int_equal(record.replaced, 7);
    assert_int_equal(record.change, ITEM_TAGGED_AGAIN);
    assert_true(record.stored_at_ms == 5000);
    assert_int_equal(record.filed_seq, 6);
    assert_true(record.filed_stored_at_ms == -2000);
    assert_true(is_text(record.title, "Night watch"));
    assert_true(is_text(record.text, "fog from the west"));
    assert_true(is_text(record.fields, "{\"station\":\"Far Skerry\"}"));
    assert_true(is_text(record.language, "en"));
    assert_true(is_text(record.tagger, "m.quill"));
    assert_true(is_text(record.filed_at, "1911-02-03T04:00:00Z"));
    assert_names(fixture, record.filed, "fog quay");
    assert_names(fixture, record.prompted, "quay");
    assert_names(fixture, record.declined, "wreck");
}

static void assert_evidence(struct fixture *fixture)
{
    struct item_record record = fixture_item(fixture, ID);
    assert_int_equal(record.ruling_count, 3);
    assert_ruling(&record.rulings[0], 3, true, -4000, "e.ditor");  /* bell */
    assert_ruling(&record.rulings[1], 4, false, -4000, "e.ditor"); /* lamp */
    assert_ruling(&record.rulings[2], 6, false, -1000, "");        /* quay */
    assert_true(record.filed_after_check);
    assert_true(record.check.is_there && record.check.is_random);
    assert_true(record.check.at_ms == 3000);
    assert_true(is_text(record.check.checker, "c.lerk"));
    assert_int_equal(record.check.vocabulary, 6); /* quay came later */
    assert_int_equal(record.check.seen, 3);       /* fog, gale, bell */
    assert_names(fixture, record.check.tags, "fog bell horn");
    assert_names(fixture, record.check.given, "fog");
    assert_names(fixture, record.check.hidden, "horn"); /* bell was ruled */
    assert_names(fixture, record.check.extra, "gale");
    assert_int_equal(record.second_count, 2);
    assert_true(is_text(record.seconds[0].tagger, "o.reed"));
    assert_true(is_text(record.seconds[0].filed_at, "1911-02-04T09:00:00Z"));
    assert_true(record.seconds[0].at_ms == 4000);
    assert_names(fixture, record.seconds[0].tags, "fog horn");
    assert_true(is_text(record.seconds[1].tagger, "p.inner"));
    assert_int_equal(record.seconds[1].filed_at.size, 0);
    assert_int_equal(record.seconds[1].tags.count, 0);
}

/* Each of those who have said what stands, whoever came after. */
static void assert_users(struct fixture *fixture)
{
    struct item_record record = fixture_item(fixture, ID);
    assert_int_equal(record.uid, 1011); /* of the last change */
    assert_int_equal(record.filed_uid, 1007);
    assert_int_equal(record.check.uid, 1009);
    assert_int_equal(record.rulings[0].uid, 1008);
    assert_int_equal(record.rulings[1].uid, 1008);
    assert_int_equal(record.rulings[2].uid, 1012);
    assert_int_equal(record.seconds[0].uid, 1010);
    assert_int_equal(record.seconds[1].uid, 1011);
}

static void assert_what_follows(struct fixture *fixture)
{
    struct item_record record = fixture_item(fixture, ID);
    assert_names(fixture, record.tags, "fog bell horn");
    assert_names(fixture, record.unprompted, "fog");
    assert_names(fixture, record.examined, "bell horn");
    assert_names(fixture, record.belongs, "bell");
    assert_names(fixture, record.denied, "lamp quay");
    assert_names(fixture, record.known_not, "wreck lamp quay");
}

static void a_record_with_everything_is_read_again(void **state)
{
    struct fixture *fixture = *state;
    say_everything(fixture);
    assert_filing(fixture);
    assert_evidence(fixture);
    assert_users(fixture);
    assert_what_follows(fixture);
}

static void it_is_there_after_a_restart(void **state)
{
    struct fixture *fixture = *state;
    say_everything(fixture);
    struct store_totals before = fixture_totals(fixture);
    fixture_close(fixture);
    fixture_open(fixture);
    assert_filing(fixture);
    assert_evidence(fixture);
    assert_users(fixture);
    assert_what_follows(fixture);
    struct store_totals after = fixture_totals(fixture);
    assert_memory_equal(&before, &after, sizeof before);
    assert_int_equal(after.evidence.checks_random, 1);
    assert_int_equal(after.evidence.second_items, 1);
}

static void erasing_what_was_passed_keeps_the_current_record(void **state)
{
    struct fixture *fixture = *state;
    struct store_error error = {0};
    struct item_record record = {0};
    say_everything(fixture);
    assert_int_equal(fixture_erase(fixture, 8), 6); /* 2 to 7 */
    struct store_view *view = fixture_read(fixture);
    for (uint64_t seq = 2; seq <= 7; seq++) {
        assert_int_equal(items_read(view, seq, &fixture->reading, &record, &error),
                         STORE_NOT_FOUND);
    }
    store_end(view);
    assert_filing(fixture);
    assert_evidence(fixture);
    assert_what_follows(fixture);
}

/* --- the form of a record, by hand, as items_private.h and item_evidence.c have it --- */

static void put_text(struct codec_writer *record, const char *text)
{
    codec_put_blob(record, text, strlen(text));
}

/* A filing of log/2 with the tags 0 and 1, both prompted, and 2 declined. */
static void put_filing(struct codec_writer *record)
{
    struct codec_writer content = {0};
    static const uint32_t LISTS[] = {2, 0, 1, 2, 0, 1, 1, 2};
    put_text(&content, "calm");
    put_text(&content, "nothing to report");
    put_text(&content, "");
    put_text(&content, "en");
    for (size_t i = 0; i < sizeof LISTS / sizeof LISTS[0]; i++) {
        codec_put_u32(&content, LISTS[i]);
    }
    codec_put_u8(record, RECORD_ITEM);
    codec_put_u64(record, 0);
    codec_put_u64(record, 9);
    codec_put_u32(record, 1007);
    put_text(record, "log/2");
    put_text(record, "m.quill");
    put_text(record, "");
    codec_put_blob(record, content.data, content.size);
    codec_deinit(&content);
}

/* What a record's counts say, beside what is there. */
struct counts {
    uint32_t rulings;
    uint32_t check_lists[4]; /* tags, given, hidden, extra */
    uint32_t seconds;
    uint32_t second_tags;
};

static const struct counts RIGHT = {1, {1, 1, 0, 1}, 1, 2};

/* Evidence with a ruling on 3, a check that has 0 alone, and a second tagging with 0 and 1. */
static void put_said(struct codec_writer *record, uint8_t change, const struct counts *counts)
{
    static const uint32_t CHECK_TAGS[4] = {0, 0, 0, 1}; /* of each list's one number, if any */
    codec_put_u8(record, change);
    codec_put_u64(record, 1);
    codec_put_u64(record, 9);
    codec_put_u8(record, 0);
    codec_put_u32(record, counts->rulings);
    codec_put_u32(record, 3);
    codec_put_u8(record, 0);
    codec_put_u64(record, 10);
    put_text(record, "e.ditor");
    codec_put_u8(record, 2);
    codec_put_u64(record, 11);
    put_text(record, "c.lerk");
    codec_put_u32(record, 4);
    codec_put_u32(record, 2);
    for (size_t i = 0; i < 4; i++) {
        codec_put_u32(record, counts->check_lists[i]);
        if (RIGHT.check_lists[i] > 0) {
            codec_put_u32(record, CHECK_TAGS[i]);
        }
    }
    codec_put_u32(record, counts->seconds);
    put_text(record, "o.reed");
    put_text(record, "");
    codec_put_u64(record, 12);
    codec_put_u32(record, counts->second_tags);
    codec_put_u32(record, 0);
    codec_put_u32(record, 1);
}

/* The same with its users: of the filing, the check, the ruling, the second tagging. */
static void put_evidence(struct codec_writer *record, uint8_t change, const struct counts *counts)
{
    put_said(record, change, counts);
    for (uint32_t uid = 1007; uid <= 1010; uid++) {
        codec_put_u32(record, uid);
    }
}

/* Reads all that a record points to, as a sanitizer would have it. */
static size_t read_all(const struct item_record *record)
{
    const struct numbers *const lists[] = {
        &record->filed,       &record->prompted,   &record->declined,     &record->tags,
        &record->unprompted,  &record->examined,   &record->belongs,      &record->denied,
        &record->known_not,   &record->check.tags, &record->check.hidden, &record->check.given,
        &record->check.extra,
    };
    size_t sum = 0;
    for (size_t i = 0; i < sizeof lists / sizeof lists[0]; i++) {
        for (size_t j = 0; j < lists[i]->count; j++) {
            sum += lists[i]->list[j];
        }
    }
    for (size_t i = 0; i < record->ruling_count; i++) {
        sum += codec_checksum(record->rulings[i].editor.data, record->rulings[i].editor.size);
    }
    for (size_t i = 0; i < record->second_count; i++) {
        sum += codec_checksum(record->seconds[i].tagger.data, record->seconds[i].tagger.size);
        for (size_t j = 0; j < record->seconds[i].tags.count; j++) {
            sum += record->seconds[i].tags.list[j];
        }
    }
    return sum;
}

/* Puts bytes in as the record of the next change, with a right checksum, and reads it into a buffer
 * of its own; nothing of it stays. */
static int read_bytes(struct fixture *fixture, const unsigned char *bytes, size_t size,
                      void (*look)(const struct item_record *record))
{
    struct store_error error = {0};
    struct item_buffer buffer = {0};
    struct item_record record = {0};
    struct codec_writer raw = {0};
    codec_put_raw(&raw, bytes, size);
    struct store_view *view = fixture_write(fixture);
    uint64_t seq = store_view_totals(view).seq + 1;
    assert_int_equal(records_put(view, seq, &raw, &error), STORE_OK);
    int result = items_read(view, seq, &buffer, &record, &error);
    if (result == STORE_OK) {
        (void)read_all(&record);
        if (look) {
            look(&record);
        }
    } else {
        assert_int_equal(record.seq, 0); /* untouched */
        assert_true(error.text[0] != '\0');
    }
    store_end(view);
    item_buffer_deinit(&buffer);
    codec_deinit(&raw);
    return result;
}

static int read_record_of(struct fixture *fixture, uint8_t change, const struct counts *counts,
                          void (*look)(const struct item_record *record))
{
    struct codec_writer record = {0};
    put_filing(&record);
    put_evidence(&record, change, counts);
    int result = read_bytes(fixture, record.data, record.size, look);
    codec_deinit(&record);
    return result;
}

static void look_at_right_record(const struct item_record *record)
{
    assert_int_equal(record->change, ITEM_CHECKED);
    assert_int_equal(record->ruling_count, 1);
    assert_ruling(&record->rulings[0], 3, false, 10, "e.ditor");
    assert_true(record->check.is_random);
    assert_int_equal(record->check.vocabulary, 4);
    assert_int_equal(record->check.seen, 2);
    assert_int_equal(record->check.tags.count, 1);
    assert_int_equal(record->check.extra.list[0], 1);
    assert_int_equal(record->second_count, 1);
    assert_int_equal(record->seconds[0].tags.count, 2);
    assert_int_equal(record->tags.count, 1);
    assert_int_equal(record->known_not.count, 2); /* 2 declined, 3 ruled out */
    assert_int_equal(record->filed_uid, 1007);
    assert_int_equal(record->check.uid, 1008);
    assert_int_equal(record->rulings[0].uid, 1009);
    assert_int_equal(record->seconds[0].uid, 1010);
}

static void look_at_record_without_users(const struct item_record *record)
{
    assert_int_equal(record->uid, 1007); /* of the last change */
    assert_int_equal(record->filed_uid, ITEM_NO_UID);
    assert_int_equal(record->check.uid, ITEM_NO_UID);
    assert_int_equal(record->rulings[0].uid, ITEM_NO_UID);
    assert_int_equal(record->seconds[0].uid, ITEM_NO_UID);
    assert_int_equal(record->seconds[0].tags.count, 2); /* and all the rest is there */
}

static void a_record_of_format_2_does_not_say_who(void **state)
{
    struct codec_writer record = {0};
    put_filing(&record);
    put_said(&record, ITEM_CHECKED, &RIGHT);
    assert_int_equal(read_bytes(*state, record.data, record.size, look_at_record_without_users),
                     STORE_OK);
    codec_deinit(&record);
}

static void a_record_has_the_form_that_is_written_down(void **state)
{
    assert_int_equal(read_record_of(*state, ITEM_CHECKED, &RIGHT, look_at_right_record), STORE_OK);
}

static void the_record_of_a_plain_filing_ends_with_its_content(void **state)
{
    struct fixture *fixture = *state;
    struct codec_writer expected = {0};
    struct item_filing filing = {.id = text_of("log/2"),
                                 .title = text_of("calm"),
                                 .text = text_of("nothing to report"),
                                 .language = text_of("en"),
                                 .tagger = text_of("m.quill"),
                                 .stored_at_ms = 9,
                                 .uid = 1007};
    (void)fixture_file_as(fixture, (struct item_filing){.id = text_of("log/1")},
                          (struct names){.tags = {"fog", "gale", "wreck"}});
    uint64_t seq = fixture_file_as(fixture, filing,
                                   (struct names){{"fog", "gale"}, {"fog", "gale"}, {"wreck"}})
                       .seq;
    (void)fixture_record(fixture, seq);
    put_filing(&expected);
    assert_int_equal(fixture->reading.record.size, expected.size);
    assert_memory_equal(fixture->reading.record.data, expected.data, expected.size);
    codec_deinit(&expected);
}

/* --- damage --- */

static void a_record_that_ends_too_early_is_damaged(void **state)
{
    struct codec_writer record = {0};
    put_filing(&record);
    size_t plain = record.size; /* a filing that nobody has looked at ends here */
    put_evidence(&record, ITEM_CHECKED, &RIGHT);
    size_t before = record.size - 4 * sizeof(uint32_t); /* a record of format 2 ends here */
    for (size_t size = 1; size < record.size; size++) {
        int result = read_bytes(*state, record.data, size, NULL);
        if (result != (size == plain || size == before ? STORE_OK : STORE_CORRUPT)) {
            fail_msg("%zu of %zu bytes: %d", size, record.size, result);
        }
    }
    codec_deinit(&record);
}

static void a_wild_count_is_damage(void **state)
{
    static const uint32_t WILD[] = {1000, 0x10000, 0x3FFFFFFF, 0x40000001, UINT32_MAX};
    for (size_t i = 0; i < sizeof WILD / sizeof WILD[0]; i++) {
        struct counts wrong[7];
        for (size_t k = 0; k < 7; k++) {
            wrong[k] = RIGHT;
        }
        for (size_t k = 0; k < 4; k++) {
            wrong[k].check_lists[k] = WILD[i];
        }
        wrong[4].rulings = WILD[i];
        wrong[5].seconds = WILD[i];
        wrong[6].second_tags = WILD[i];
        for (size_t k = 0; k < 7; k++) {
            assert_int_equal(read_record_of(*state, ITEM_CHECKED, &wrong[k], NULL), STORE_CORRUPT);
        }
    }
}

static void a_change_of_no_kind_is_damage(void **state)
{
    for (unsigned change = 0; change < 256; change++) {
        int expected = change < ITEM_WITHDRAWN ? STORE_OK : STORE_CORRUPT;
        assert_int_equal(read_record_of(*state, (uint8_t)change, &RIGHT, NULL), expected);
    }
}

/* Four bytes of each record are overwritten, often with a small or a very large number. */
static void whatever_stands_in_a_record_no_reader_leaves_it(void **state)
{
    struct codec_writer record = {0};
    struct repeatable random = {.state = 1911};
    unsigned damaged = 0;
    unsigned read = 0;
    put_filing(&record);
    put_evidence(&record, ITEM_CHECKED, &RIGHT);
    unsigned char *bytes = malloc(record.size);
    assert_non_null(bytes);
    for (int round = 0; round < 5000; round++) {
        static const uint32_t VALUES[] = {0, 1, 3, 12, 40, 0x3FFFFFFF, 0x7FFFFFFF, UINT32_MAX};
        uint32_t value = VALUES[repeatable_below(&random, 8)];
        memcpy(bytes, record.data, record.size);
        memcpy(bytes + repeatable_below(&random, (uint32_t)record.size - 3), &value, sizeof value);
        int result = read_bytes(*state, bytes, record.size, NULL);
        assert_true(result == STORE_OK || result == STORE_CORRUPT);
        damaged += result == STORE_CORRUPT;
        read += result == STORE_OK;
    }
    assert_true(damaged > 500 && read > 500); /* both ways were taken */
    free(bytes);
    codec_deinit(&record);
}

#define TEST(name) cmocka_unit_test_setup_teardown(name, fixture_setup, fixture_teardown)

int main(void)
{
    const struct CMUnitTest tests[] = {
        TEST(a_record_with_everything_is_read_again),
        TEST(it_is_there_after_a_restart),
        TEST(erasing_what_was_passed_keeps_the_current_record),
        TEST(a_record_has_the_form_that_is_written_down),
        TEST(a_record_of_format_2_does_not_say_who),
        TEST(the_record_of_a_plain_filing_ends_with_its_content),
        TEST(a_record_that_ends_too_early_is_damaged),
        TEST(a_wild_count_is_damage),
        TEST(a_change_of_no_kind_is_damage),
        TEST(whatever_stands_in_a_record_no_reader_leaves_it),
    };
    return cmocka_run_group_tests_name("evidence of items", tests, NULL, NULL);
}
