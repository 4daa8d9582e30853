/*
 * Damaged stores: whatever has become of what is stored, it is read as it was, or it is refused.
 *
 * Input: steps. Each turns bits of a stored value over, cuts it, or puts a crafted record (with a
 * checksum that is right) in the place of an item. Then all of the store is read and changed. It is
 * one view, which is never committed; so each input meets the same store.
 */
#include "storage/items_examine.h"
#include "storage/items_latest.h"
#include "storage/items_private.h"
#include "storage/proof.h"
#include "storage/store_notes.h"
#include "storage/store_private.h"
#include "storage/vocabulary.h"

#include "tests/fuzz/home.h"

enum {
    STEPS_MOST = 8,
    CRAFTED_MOST = 8,
    BASE_SEQS = 10, /* what make_base files */
    SEQS_MOST = BASE_SEQS + CRAFTED_MOST,
    IDS = 4,
    TAGS = 5
};

static const char *const ID[IDS] = {"farrow/1", "farrow/2", "gull/1", "gull/2"};
static const char *const TAG[TAGS] = {"fog", "bell", "lamp", "oil", "wreck"};
static const char NOTE[] = "rebuild";

struct world {
    char home[HOME_BYTES];
    struct store *store;
    struct codec_writer buffer;
    struct codec_writer described;
    struct item_buffer reading;
    /* What there is before anything is damaged. */
    struct codec_writer records[BASE_SEQS + 1];
    uint64_t seqs[IDS];
    struct vocabulary_tag tags[TAGS];
};

static struct world world;

static struct store_text text_of(const char *text)
{
    return (struct store_text){.data = text, .size = strlen(text)};
}

/* --- all that a record says, as bytes; so every byte of it is read --- */

static void describe_numbers(struct codec_writer *into, struct numbers numbers)
{
    codec_put_u32(into, (uint32_t)numbers.count);
    for (size_t i = 0; i < numbers.count; i++) {
        codec_put_u32(into, numbers.list[i]);
    }
}

static void describe_text(struct codec_writer *into, struct store_text text)
{
    codec_put_blob(into, text.data, text.size);
}

static void describe_evidence(struct codec_writer *into, const struct item_record *record)
{
    const struct item_check *check = &record->check;
    codec_put_u64(into, record->filed_seq);
    codec_put_u8(into, record->filed_after_check);
    for (size_t i = 0; i < record->ruling_count; i++) {
        codec_put_u32(into, record->rulings[i].tag);
        codec_put_u8(into, record->rulings[i].belongs);
        codec_put_u64(into, (uint64_t)record->rulings[i].at_ms);
        describe_text(into, record->rulings[i].editor);
    }
    codec_put_u8(into, check->is_there);
    codec_put_u8(into, check->is_random);
    describe_text(into, check->is_there ? check->checker : text_of(""));
    describe_numbers(into, check->tags);
    describe_numbers(into, check->given);
    describe_numbers(into, check->hidden);
    describe_numbers(into, check->extra);
    for (size_t i = 0; i < record->second_count; i++) {
        describe_text(into, record->seconds[i].tagger);
        describe_text(into, record->seconds[i].filed_at);
        describe_numbers(into, record->seconds[i].tags);
    }
}

static void describe(struct codec_writer *into, const struct item_record *record)
{
    codec_reset(into);
    codec_put_u64(into, record->seq);
    codec_put_u64(into, record->replaced);
    codec_put_u8(into, (uint8_t)record->change);
    codec_put_u64(into, (uint64_t)record->stored_at_ms);
    codec_put_u32(into, record->uid);
    describe_text(into, record->id);
    if (item_is_withdrawn(record)) {
        return;
    }
    describe_text(into, record->title);
    describe_text(into, record->text);
    describe_text(into, record->fields);
    describe_text(into, record->language);
    describe_text(into, record->tagger);
    describe_text(into, record->filed_at);
    describe_evidence(into, record);
    const struct numbers lists[] = {record->filed,   record->prompted,   record->declined,
                                    record->tags,    record->unprompted, record->examined,
                                    record->belongs, record->denied,     record->known_not};
    for (size_t i = 0; i < sizeof lists / sizeof lists[0]; i++) {
        describe_numbers(into, lists[i]);
    }
    FUZZ_CHECK(!into->failed);
}

static bool is_same(const struct codec_writer *left, const struct codec_writer *right)
{
    return left->size == right->size && memcmp(left->data, right->data, left->size) == 0;
}

/* --- changes, by the number of an id; the first ones make the base --- */

static int file(struct store_view *view, size_t id, const char *text, size_t tags,
                struct store_error *error)
{
    struct store_text names[TAGS];
    struct item_filed filed;
    struct item_refusal refusal;
    for (size_t i = 0; i < TAGS; i++) {
        names[i] = text_of(TAG[i]);
    }
    const struct item_filing filing = {.id = text_of(ID[id]),
                                       .title = text_of("A watch"),
                                       .text = text_of(text),
                                       .fields = text_of("{\"desk\":\"harbour\"}"),
                                       .language = text_of("en"),
                                       .tagger = text_of("E. Marrow"),
                                       .filed_at = text_of("1911-03-09T18:30:00Z"),
                                       .tags = names,
                                       .tag_count = tags,
                                       .prompted = names,
                                       .prompted_count = tags > 1 ? 1 : 0,
                                       .declined = names + tags,
                                       .declined_count = tags > 1 && tags < TAGS ? 1 : 0,
                                       .stored_at_ms = 1911,
                                       .uid = 7,
                                       .open_unknown = true};
    return items_file(view, &filing, &world.buffer, &filed, &refusal, error);
}

static struct item_saying saying(size_t id, const char *who)
{
    return (struct item_saying){
        .id = text_of(ID[id]), .who = text_of(who), .at_ms = 1912, .uid = 8};
}

static int rule(struct store_view *view, size_t id, struct store_error *error)
{
    struct store_text names[] = {text_of("lamp"), text_of("bell")};
    struct item_filed filed;
    struct item_refusal refusal;
    struct item_saying said = saying(id, "A. Sorrel");
    return items_rule(view, &said, (struct item_names){names, 1}, (struct item_names){names + 1, 1},
                      &world.buffer, &filed, &refusal, error);
}

static int check(struct store_view *view, size_t id, struct store_error *error)
{
    struct store_text names[] = {text_of("oil"), text_of("fog")};
    struct item_filed filed;
    struct item_refusal refusal;
    struct item_checked checked = {0};
    struct item_saying said = saying(id, "A. Sorrel");
    int code = items_check(view, &said, (struct item_names){names, 2}, true, &world.buffer, &filed,
                           &checked, &refusal, error);
    free(checked.missed);
    free(checked.extra);
    return code;
}

static int tag_again(struct store_view *view, size_t id, struct store_error *error)
{
    struct store_text names[] = {text_of("wreck"), text_of("fog")};
    struct item_filed filed;
    struct item_refusal refusal;
    struct item_saying said = saying(id, "I. Teasel");
    return items_tag_again(view, &said, (struct item_names){names, 2},
                           text_of("1912-01-01T00:00:00Z"), true, &world.buffer, &filed, &refusal,
                           error);
}

static int withdraw(struct store_view *view, size_t id, struct store_error *error)
{
    uint64_t seq = 0;
    return items_withdraw(view, text_of(ID[id]), 1913, 9, &world.buffer, &seq, error);
}

static void make_base(struct store_view *view)
{
    char text[4000]; /* three pieces */
    struct store_error error = {0};
    memset(text, 'f', sizeof text - 1);
    text[sizeof text - 1] = '\0';
    int code = file(view, 0, text, 5, &error);
    code |= file(view, 1, "Fog at dawn.", 2, &error);
    code |= rule(view, 0, &error);
    code |= check(view, 1, &error);
    code |= tag_again(view, 0, &error);
    code |= file(view, 2, "Bell rung.", 1, &error);
    code |= withdraw(view, 2, &error);
    code |= file(view, 3, "Oil delivered.", 3, &error);
    code |= file(view, 3, "", 4, &error);
    code |= rule(view, 1, &error);
    code |= store_put_note(view, NOTE, "settings", 8, &error);
    FUZZ_NEED(code == STORE_OK, error.text);
}

static void open_world(void)
{
    struct store_error error = {0};
    struct store_view *view = NULL;
    home_make(world.home);
    const struct store_settings settings = {.home = world.home, .map_bytes = HOME_MAP_BYTES};
    FUZZ_NEED(store_open(&settings, &world.store, &error) == STORE_OK, error.text);
    FUZZ_NEED(store_write(world.store, &view, &error) == STORE_OK, error.text);
    make_base(view);
    FUZZ_NEED(store_view_totals(view).seq == BASE_SEQS, "another base");
    for (uint64_t seq = 1; seq <= BASE_SEQS; seq++) {
        struct item_record record;
        int code = items_read(view, seq, &world.reading, &record, &error);
        FUZZ_NEED(code == STORE_OK, error.text);
        describe(&world.records[seq], &record);
    }
    for (size_t i = 0; i < IDS; i++) {
        int code = items_find(view, text_of(ID[i]), &world.seqs[i], &error);
        FUZZ_NEED(code == STORE_OK || code == STORE_NOT_FOUND, error.text); /* withdrawn: 0 */
    }
    for (size_t i = 0; i < TAGS; i++) {
        int code = vocabulary_find(view, TAG[i], strlen(TAG[i]), &world.tags[i], &error);
        FUZZ_NEED(code == STORE_OK, error.text);
    }
    FUZZ_NEED(store_commit(view, &error) == STORE_OK, error.text);
}

static void close_world(void)
{
    store_close(world.store);
    home_remove(world.home);
    codec_deinit(&world.buffer);
    codec_deinit(&world.described);
    item_buffer_deinit(&world.reading);
    for (size_t seq = 0; seq <= BASE_SEQS; seq++) {
        codec_deinit(&world.records[seq]);
    }
}

/* --- steps --- */

struct entry {
    size_t left; /* entries before it */
    struct codec_writer key;
    struct codec_writer value;
};

static int take_entry(void *user, struct kv_cursor *at, struct kv_bytes key, struct kv_bytes value)
{
    struct entry *entry = user;
    (void)at;
    codec_reset(&entry->key);
    codec_reset(&entry->value);
    codec_put_raw(&entry->key, key.data, key.size);
    codec_put_raw(&entry->value, value.data, value.size);
    return entry->left-- > 0 ? STORE_OK : STORE_STOPPED; /* the last one where there are fewer */
}

/* A value that ends before its proof is one of an earlier version, which had none. */
static bool is_unproven(unsigned table, size_t size)
{
    static const size_t UNPROVEN[STORE_TABLES] = {
        [TABLE_IDS] = ID_ENTRY_BYTES, [TABLE_SUPERSEDED] = 8, [TABLE_TAG_NAMES] = 4};
    return size == UNPROVEN[table];
}

static void damage(struct store_view *view, struct fuzz_input *input)
{
    /* TABLE_META is read as a view begins; see tests/unit/test_store_damage.c. */
    unsigned table = TABLE_IDS + fuzz_byte(input) % (STORE_TABLES - 1U);
    struct entry entry = {.left = fuzz_byte(input) % 16U};
    struct store_error error = {0};
    int code = kv_walk(view->txn, table, kv_bytes_of(NULL, 0), take_entry, &entry, &error);
    FUZZ_CHECK(code == STORE_OK || code == STORE_STOPPED);
    size_t at = fuzz_byte(input) | (size_t)fuzz_byte(input) << 8U;
    uint8_t mask = fuzz_byte(input);
    at = entry.value.size > 0 ? at % entry.value.size : 0;
    if (entry.value.size > 0 && mask != 0) {
        entry.value.data[at] ^= mask;
    } else {
        entry.value.size = is_unproven(table, at) ? 0 : at;
    }
    if (entry.key.size > 0) {
        code = kv_put(view->txn, table, kv_bytes_of(entry.key.data, entry.key.size),
                      kv_bytes_of(entry.value.data, entry.value.size), &error);
        FUZZ_NEED(code == STORE_OK, error.text);
    }
    codec_deinit(&entry.key);
    codec_deinit(&entry.value);
}

/* A record of any bytes under the next seq, as the newest of an id. */
static void craft(struct store_view *view, struct fuzz_input *input)
{
    size_t id = fuzz_byte(input) % IDS;
    struct fuzz_input bytes = fuzz_part(input, fuzz_byte(input) | (size_t)fuzz_byte(input) << 8U);
    struct codec_writer record = {0};
    struct codec_writer entry = {0};
    struct store_error error = {0};
    codec_put_u8(&record, 0);
    record.size = 0; /* even an empty one has data */
    codec_put_raw(&record, bytes.data, bytes.size);
    uint64_t seq = ++view->totals.seq;
    int code = records_put(view, seq, &record, &error);
    FUZZ_NEED(code == STORE_OK, error.text);
    codec_put_u64(&entry, seq);
    codec_put_u8(&entry, 0);
    struct kv_bytes key = kv_bytes_of(ID[id], strlen(ID[id]));
    proof_put(&entry, key);
    code = kv_put(view->txn, TABLE_IDS, key, kv_bytes_of(entry.data, entry.size), &error);
    FUZZ_NEED(code == STORE_OK, error.text);
    codec_deinit(&record);
    codec_deinit(&entry);
}

/* --- what must hold then --- */

/* The codes that damage may bring about; it is told in a sentence. */
static void check_code(int code, const struct store_error *error)
{
    FUZZ_CHECK(code == STORE_OK || code == STORE_CORRUPT || code == STORE_NOT_FOUND ||
               code == STORE_REFUSED || code == STORE_STOPPED);
    FUZZ_CHECK(code != STORE_CORRUPT || fuzz_is_sentence(error->text));
}

static void check_records(struct store_view *view)
{
    for (uint64_t seq = 1; seq <= view->totals.seq; seq++) {
        struct store_error error = {0};
        struct item_record record;
        int code = items_read(view, seq, &world.reading, &record, &error);
        check_code(code, &error);
        FUZZ_CHECK(code == STORE_OK || code == STORE_CORRUPT);
        if (code == STORE_OK) {
            describe(&world.described, &record);
            FUZZ_CHECK(seq > BASE_SEQS || is_same(&world.described, &world.records[seq]));
        }
    }
}

/* An id leads to its own newest record, or to none. */
static void check_ids(struct store_view *view)
{
    for (size_t i = 0; i < IDS; i++) {
        struct store_error error = {0};
        uint64_t seq = 0;
        bool was = false;
        int code = items_find(view, text_of(ID[i]), &seq, &error);
        check_code(code, &error);
        FUZZ_CHECK(code != STORE_OK || seq == world.seqs[i] || seq > BASE_SEQS);
        FUZZ_CHECK(code != STORE_NOT_FOUND || world.seqs[i] == 0);
        code =
            items_was_latest(view, text_of(ID[i]), 1, BASE_SEQS / 2, &world.reading, &was, &error);
        check_code(code, &error);
    }
}

static int touch_tag(void *user, const struct vocabulary_tag *tag)
{
    *(size_t *)user += strlen(tag->name);
    return STORE_OK;
}

static void check_tags(struct store_view *view)
{
    struct store_error error = {0};
    size_t bytes = 0;
    for (size_t i = 0; i < TAGS; i++) {
        struct vocabulary_tag tag = {0};
        struct store_error found = {0};
        int code = vocabulary_find(view, TAG[i], strlen(TAG[i]), &tag, &found);
        check_code(code, &found);
        FUZZ_CHECK(code != STORE_NOT_FOUND);
        if (code == STORE_OK) {
            FUZZ_CHECK(strcmp(tag.name, TAG[i]) == 0 && tag.number == world.tags[i].number);
            FUZZ_CHECK(memcmp(&tag.counts, &world.tags[i].counts, sizeof tag.counts) == 0);
        }
    }
    check_code(vocabulary_by_name(view, "", 0, touch_tag, &bytes, &error), &error);
    error = (struct store_error){0};
    check_code(vocabulary_by_number(view, touch_tag, &bytes, &error), &error);
}

static int touch_item(void *user, const struct item_record *record)
{
    *(size_t *)user += record->id.size;
    return STORE_OK;
}

static void check_walks(struct store_view *view)
{
    struct store_error error = {0};
    size_t bytes = 0;
    uint64_t next = 0;
    int code = items_changed(view, 0, 100, touch_item, &bytes, &world.reading, &next, &error);
    check_code(code, &error);
    error = (struct store_error){0};
    codec_reset(&world.described);
    code = store_get_note(view, NOTE, &world.described, &error);
    FUZZ_CHECK(code == STORE_OK && world.described.size == 8);
}

/* What is current is not erased, whatever has become of the list of what is superseded. */
static void check_erasing(struct store_view *view)
{
    struct store_error error = {0};
    size_t erased = 0;
    check_code(store_erase_passed(view, UINT64_MAX, 100, &erased, &error), &error);
    for (size_t i = 0; i < IDS; i++) {
        struct item_record record;
        uint64_t seq = world.seqs[i];
        error = (struct store_error){0};
        FUZZ_CHECK(seq == 0 ||
                   items_read(view, seq, &world.reading, &record, &error) != STORE_NOT_FOUND);
    }
}

static void check_changes(struct store_view *view)
{
    static int (*const CHANGES[])(struct store_view *, size_t,
                                  struct store_error *) = {rule, check, tag_again, withdraw};
    for (size_t i = 0; i < IDS; i++) {
        for (size_t j = 0; j < sizeof CHANGES / sizeof CHANGES[0]; j++) {
            struct store_error error = {0};
            check_code(CHANGES[j](view, i, &error), &error);
        }
        struct store_error error = {0};
        check_code(file(view, i, "Lamp lit.", 2, &error), &error);
    }
}

int LLVMFuzzerTestOneInput(const uint8_t *data, size_t size)
{
    struct fuzz_input input = {.data = data, .size = size};
    struct store_error error = {0};
    struct store_view *view = NULL;
    if (!world.store) {
        open_world();
        (void)atexit(close_world);
    }
    FUZZ_NEED(store_write(world.store, &view, &error) == STORE_OK, error.text);
    bool is_crafted = false;
    for (int i = 0; i < STEPS_MOST && input.size > 0; i++) {
        bool crafts = fuzz_byte(&input) & 1U;
        is_crafted = is_crafted || crafts;
        (crafts ? craft : damage)(view, &input);
    }
    check_records(view);
    check_ids(view);
    check_tags(view);
    check_walks(view);
    if (!is_crafted) {
        check_erasing(view);
    }
    check_changes(view);
    store_end(view);
    return 0;
}

/* --- made inputs --- */

/* Crafted records: lists whose lengths are beyond all that there is. */
uint8_t *fuzz_made(size_t number, size_t *ret_size)
{
    if (number > 2) {
        return NULL;
    }
    uint8_t *made = fuzz_repeated("", number == 0 ? "\xFF" : "\x01", 60000, "", ret_size);
    const uint8_t head[] = {1, 0, 0x50, 0xC3, RECORD_ITEM};
    memcpy(made, head, sizeof head);
    return made;
}
