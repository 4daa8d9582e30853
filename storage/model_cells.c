#include "storage/model_cells.h"

#include <stdlib.h>
#include <string.h>

#include "storage/codec.h"

enum {
    KEY_BYTES = 4,
    CHECKSUM_BYTES = 4,
    MARKS_BYTES = 8,
    HEAD_BYTES = CHECKSUM_BYTES + MARKS_BYTES,
    RECORD_BYTES = KV_VALUE_BYTES,
    FIRST_CAPACITY = 64
};

/* A change, in front of its cell's bytes. */
struct change {
    uint32_t number;
    uint32_t order; /* and whether the cell is there, in the lowest bit */
};

/* A record on its way into the table. */
struct record {
    unsigned char key[KEY_BYTES];
    unsigned char value[RECORD_BYTES];
    uint64_t marks;
    bool was_there;
};

static size_t change_bytes(const struct model_cells *cells)
{
    return sizeof(struct change) + cells->cell_bytes;
}

static size_t record_bytes(const struct model_cells *cells)
{
    return HEAD_BYTES + cells->to_a_record * cells->cell_bytes;
}

void model_cells_deinit(struct model_cells_changes *changes)
{
    free(changes->list);
    changes->list = NULL;
    changes->count = 0;
    changes->capacity = 0;
}

/* --- noting -------------------------------------------------------------------------------------
 */

static int make_room(struct model_cells_changes *changes, struct store_error *error)
{
    if (changes->count < changes->capacity) {
        return STORE_OK;
    }
    size_t capacity = changes->capacity > 0 ? 2 * changes->capacity : FIRST_CAPACITY;
    unsigned char *list = realloc(changes->list, capacity * change_bytes(changes->cells));
    if (!list) {
        return store_fail(error, STORE_NO_MEMORY, "out of memory");
    }
    changes->list = list;
    changes->capacity = capacity;
    return STORE_OK;
}

int model_cells_note(struct model_cells_changes *changes, uint32_t number, const void *cell,
                     struct store_error *error)
{
    int code = make_room(changes, error);
    if (code != STORE_OK) {
        return code;
    }
    const struct change change = {.number = number,
                                  .order = (uint32_t)changes->count << 1U | (cell ? 1U : 0U)};
    unsigned char *at = changes->list + changes->count * change_bytes(changes->cells);
    memcpy(at, &change, sizeof change);
    if (cell) {
        memcpy(at + sizeof change, cell, changes->cells->cell_bytes);
    } else {
        memset(at + sizeof change, 0, changes->cells->cell_bytes);
    }
    changes->count++;
    return STORE_OK;
}

static int compare_changes(const void *left, const void *right)
{
    struct change a;
    struct change b;
    memcpy(&a, left, sizeof a);
    memcpy(&b, right, sizeof b);
    return a.number != b.number ? (a.number > b.number) - (a.number < b.number)
                                : (a.order > b.order) - (a.order < b.order);
}

/* --- records ------------------------------------------------------------------------------------
 */

static int fail_damaged(const struct model_cells *cells, struct store_error *error)
{
    return store_fail(error, STORE_CORRUPT, "a stored %s of the model is damaged", cells->what);
}

static uint32_t checksum_of(struct kv_bytes key, const unsigned char *value, size_t size)
{
    return codec_checksum_of_two(key.data, key.size, value + CHECKSUM_BYTES, size - CHECKSUM_BYTES);
}

/* Whether a value is a whole record; its marks. */
static bool open_record(const struct model_cells *cells, struct kv_bytes key, struct kv_bytes value,
                        uint64_t *ret_marks)
{
    struct codec_reader reader = {.data = value.data, .size = value.size};
    if (key.size != KEY_BYTES || value.size != record_bytes(cells) ||
        codec_get_u32(&reader) != checksum_of(key, value.data, value.size)) {
        return false;
    }
    *ret_marks = codec_get_u64(&reader);
    return cells->to_a_record == MODEL_CELLS_MOST || *ret_marks >> cells->to_a_record == 0;
}

static int read_record(const struct model_cells *cells, struct kv_txn *txn, uint32_t index,
                       struct record *ret_record, struct store_error *error)
{
    struct kv_bytes value = {0};
    codec_key_u32(ret_record->key, index);
    struct kv_bytes key = kv_bytes_of(ret_record->key, KEY_BYTES);
    int code = kv_get(txn, cells->table, key, &value, error);
    ret_record->was_there = code == STORE_OK;
    if (code == STORE_NOT_FOUND) {
        ret_record->marks = 0;
        memset(ret_record->value, 0, record_bytes(cells));
        return STORE_OK;
    }
    if (code == STORE_OK && !open_record(cells, key, value, &ret_record->marks)) {
        return fail_damaged(cells, error);
    }
    if (code == STORE_OK) {
        memcpy(ret_record->value, value.data, value.size);
    }
    return code;
}

static int write_record(const struct model_cells *cells, struct kv_txn *txn, struct record *record,
                        struct store_error *error)
{
    struct kv_bytes key = kv_bytes_of(record->key, KEY_BYTES);
    size_t size = record_bytes(cells);
    if (record->marks == 0) {
        return record->was_there ? kv_delete(txn, cells->table, key, error) : STORE_OK;
    }
    struct codec_writer head = {.data = record->value + CHECKSUM_BYTES, .capacity = MARKS_BYTES};
    codec_put_u64(&head, record->marks);
    head = (struct codec_writer){.data = record->value, .capacity = CHECKSUM_BYTES};
    codec_put_u32(&head, checksum_of(key, record->value, size));
    return kv_put(txn, cells->table, key, kv_bytes_of(record->value, size), error);
}

static void change_cell(const struct model_cells *cells, struct record *record,
                        const unsigned char *changed)
{
    struct change change;
    memcpy(&change, changed, sizeof change);
    size_t place = change.number % cells->to_a_record;
    uint64_t mark = (uint64_t)1 << place;
    record->marks = change.order & 1U ? record->marks | mark : record->marks & ~mark;
    memcpy(record->value + HEAD_BYTES + place * cells->cell_bytes, changed + sizeof change,
           cells->cell_bytes);
}

static uint32_t index_of(const struct model_cells *cells, const unsigned char *changed)
{
    struct change change;
    memcpy(&change, changed, sizeof change);
    return change.number / (uint32_t)cells->to_a_record;
}

int model_cells_make(struct model_cells_changes *changes, struct kv_txn *txn,
                     struct store_error *error)
{
    const struct model_cells *cells = changes->cells;
    size_t step = change_bytes(cells);
    struct record record;
    int code = STORE_OK;
    if (changes->count > 1) {
        qsort(changes->list, changes->count, step, compare_changes);
    }
    for (size_t i = 0; i < changes->count && code == STORE_OK;) {
        uint32_t index = index_of(cells, changes->list + i * step);
        code = read_record(cells, txn, index, &record, error);
        if (code != STORE_OK) {
            break;
        }
        for (; i < changes->count && index_of(cells, changes->list + i * step) == index; i++) {
            change_cell(cells, &record, changes->list + i * step);
        }
        code = write_record(cells, txn, &record, error);
    }
    return code;
}

/* --- reading ------------------------------------------------------------------------------------
 */

int model_cells_get(const struct model_cells *cells, struct kv_txn *txn, uint32_t number,
                    const unsigned char **ret_cell, struct store_error *error)
{
    unsigned char bytes[KEY_BYTES];
    struct kv_bytes value = {0};
    uint64_t marks = 0;
    size_t place = number % cells->to_a_record;
    codec_key_u32(bytes, number / (uint32_t)cells->to_a_record);
    struct kv_bytes key = kv_bytes_of(bytes, KEY_BYTES);
    int code = kv_get(txn, cells->table, key, &value, error);
    if (code != STORE_OK) {
        return code;
    }
    if (!open_record(cells, key, value, &marks)) {
        return fail_damaged(cells, error);
    }
    if (!(marks >> place & 1U)) {
        return STORE_NOT_FOUND;
    }
    *ret_cell = (const unsigned char *)value.data + HEAD_BYTES + place * cells->cell_bytes;
    return STORE_OK;
}

uint32_t model_cells_first(const struct model_cells *cells, struct kv_bytes key)
{
    return key.size == KEY_BYTES ? codec_u32_of_key(key.data) * (uint32_t)cells->to_a_record : 0;
}

int model_cells_of_record(const struct model_cells *cells, struct kv_bytes key,
                          struct kv_bytes value, model_cells_each each, void *user,
                          struct store_error *error)
{
    uint64_t marks = 0;
    if (!open_record(cells, key, value, &marks)) {
        return fail_damaged(cells, error);
    }
    const unsigned char *cell = (const unsigned char *)value.data + HEAD_BYTES;
    int code = STORE_OK;
    for (size_t i = 0; i < cells->to_a_record && code == STORE_OK; i++, cell += cells->cell_bytes) {
        if (marks >> i & 1U) {
            code = each(user, model_cells_first(cells, key) + (uint32_t)i, cell);
        }
    }
    return code;
}
