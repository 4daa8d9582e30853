/*
 * Each table is a tree of pages. It is gone through from the left: what divides two pages comes
 * between their entries, so that one comparison with what came last says whether all is in order.
 * A table's first fault ends the look through it: what follows from a damaged page says nothing.
 */
#include <errno.h>
#include <inttypes.h>
#include <stdarg.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <unistd.h>

#include "storage/kv_page.h"
#include "storage/kv_private.h"

enum {
    MOST_LEVELS = 32, /* LMDB's own limit */
    MOST_TRIES = 100, /* to read the roots before two commits have replaced them */
    NAME_BYTES = 64
};

enum last_kind {
    LAST_NONE,
    LAST_DIVIDER, /* what follows may be equal to it */
    LAST_KEY
};

struct named_table {
    char name[NAME_BYTES];
    struct kv_table_head head;
};

/* Codes are LMDB's and errno's; MDB_CORRUPTED: a fault was told. */
struct look {
    int file;
    size_t page_bytes;
    struct kv_roots roots;
    unsigned char *seen; /* a bit a page */
    unsigned char *room; /* a page for each level */
    struct named_table tables[KV_TABLES];
    size_t table_count;
    const char *table; /* the one at hand: */
    const struct kv_table_head *head;
    struct kv_table_head found;
    enum last_kind last_kind;
    size_t last_bytes;
    unsigned char last[KV_KEY_BYTES];
    kv_tell tell;
    void *user;
};

/* An entry of a page. */
struct node {
    struct kv_node_header header;
    const unsigned char *key;
    const unsigned char *value; /* of a leaf */
    size_t value_bytes;         /* as far as it is in the page */
};

static __attribute__((format(printf, 2, 3))) void fault(const struct look *look, const char *format,
                                                        ...)
{
    char what[STORE_ERROR_BYTES / 2];
    char sentence[STORE_ERROR_BYTES];
    va_list arguments;
    va_start(arguments, format);
    (void)vsnprintf(what, sizeof what, format, arguments); /* it fits */
    va_end(arguments);
    (void)snprintf(sentence, sizeof sentence, "table %s: %s", look->table, what);
    look->tell(look->user, sentence);
}

static int read_at(const struct look *look, uint64_t at, void *into, size_t bytes)
{
    ssize_t got = pread(look->file, into, bytes, (off_t)at);
    if (got < 0) {
        return errno;
    }
    if ((size_t)got != bytes) {
        fault(look, "the file ends too early");
        return MDB_CORRUPTED;
    }
    return MDB_SUCCESS;
}

/* The page becomes that of one table, or of the list of free ones. */
static int take_page(const struct look *look, uint64_t number)
{
    if (number < KV_FIRST_PAGE || number > look->roots.last_page) {
        fault(look, "it leads to page %" PRIu64 ", which is not there", number);
        return MDB_CORRUPTED;
    }
    unsigned char bit = (unsigned char)(1U << (number % 8));
    if (look->seen[number / 8] & bit) {
        fault(look, "page %" PRIu64 " has two uses", number);
        return MDB_CORRUPTED;
    }
    look->seen[number / 8] |= bit;
    return MDB_SUCCESS;
}

static bool is_free_list(const struct look *look)
{
    return look->head == &look->roots.free;
}

/* --- entries ------------------------------------------------------------------------------------
 */

static int compare(const struct look *look, const unsigned char *key, size_t bytes)
{
    if (is_free_list(look) && bytes == sizeof(uint64_t) && look->last_bytes == bytes) {
        uint64_t one = 0;
        uint64_t other = 0;
        memcpy(&one, look->last, sizeof one);
        memcpy(&other, key, sizeof other);
        return (one > other) - (one < other);
    }
    size_t common = bytes < look->last_bytes ? bytes : look->last_bytes;
    int order = memcmp(look->last, key, common);
    return order != 0 ? order : (look->last_bytes > bytes) - (look->last_bytes < bytes);
}

static int check_order(struct look *look, uint64_t page, const struct node *node,
                       enum last_kind kind)
{
    size_t bytes = node->header.key_bytes;
    if (bytes > sizeof look->last) {
        fault(look, "page %" PRIu64 " has a key of %zu bytes", page, bytes);
        return MDB_CORRUPTED;
    }
    if (look->last_kind != LAST_NONE) {
        int order = compare(look, node->key, bytes);
        if (order > 0 || (order == 0 && look->last_kind == LAST_KEY)) {
            fault(look, "page %" PRIu64 " is not in order", page);
            return MDB_CORRUPTED;
        }
    }
    memcpy(look->last, node->key, bytes);
    look->last_bytes = bytes;
    look->last_kind = kind;
    return MDB_SUCCESS;
}

/* The run of pages that holds one large value, which is read. */
static int read_run(struct look *look, uint64_t first, size_t value_bytes,
                    unsigned char **ret_value)
{
    struct kv_page_header header;
    size_t pages = (sizeof header + value_bytes - 1) / look->page_bytes + 1;
    for (size_t i = 0; i < pages; i++) {
        int code = take_page(look, first + i);
        if (code != MDB_SUCCESS) {
            return code;
        }
    }
    look->found.overflow_pages += pages;
    int code = read_at(look, first * look->page_bytes, &header, sizeof header);
    if (code != MDB_SUCCESS) {
        return code;
    }
    if (header.number != first || header.flags != KV_PAGE_OVERFLOW || header.size.run != pages) {
        fault(look, "page %" PRIu64 " is not the large value that it should be", first);
        return MDB_CORRUPTED;
    }
    unsigned char *value = malloc(value_bytes);
    if (!value) {
        return ENOMEM;
    }
    code = read_at(look, first * look->page_bytes + sizeof header, value, value_bytes);
    if (code != MDB_SUCCESS) {
        free(value);
        return code;
    }
    *ret_value = value;
    return MDB_SUCCESS;
}

static int check_free_list(const struct look *look, const unsigned char *list, size_t bytes)
{
    uint64_t count = 0;
    if (bytes >= sizeof count) {
        memcpy(&count, list, sizeof count);
    }
    if (bytes < sizeof count || count > bytes / sizeof count - 1) {
        fault(look, "a list of free pages is damaged");
        return MDB_CORRUPTED;
    }
    for (uint64_t i = 1; i <= count; i++) {
        uint64_t page = 0;
        memcpy(&page, list + i * sizeof page, sizeof page);
        int code = take_page(look, page);
        if (code != MDB_SUCCESS) {
            return code;
        }
    }
    return MDB_SUCCESS;
}

/* An entry of the table of tables. */
static int note_table(struct look *look, const struct node *node)
{
    struct named_table *table = &look->tables[look->table_count];
    if (look->table_count == KV_TABLES || node->header.key_bytes >= sizeof table->name ||
        node->value_bytes != sizeof table->head) {
        fault(look, "it names what is not a table");
        return MDB_CORRUPTED;
    }
    memcpy(table->name, node->key, node->header.key_bytes);
    table->name[node->header.key_bytes] = '\0';
    memcpy(&table->head, node->value, sizeof table->head);
    look->table_count++;
    return MDB_SUCCESS;
}

static int check_large(struct look *look, const struct node *node)
{
    uint64_t first = 0;
    unsigned char *value = NULL;
    memcpy(&first, node->value, sizeof first);
    int code = read_run(look, first, node->header.low, &value);
    if (code == MDB_SUCCESS && is_free_list(look)) {
        code = check_free_list(look, value, node->header.low);
    }
    free(value);
    return code;
}

static int check_leaf_entry(struct look *look, uint64_t page, const struct node *node)
{
    bool is_of_tables = look->head == &look->roots.main;
    look->found.entries++;
    int code = check_order(look, page, node, LAST_KEY);
    if (code != MDB_SUCCESS) {
        return code;
    }
    if ((node->header.flags & ~KV_NODE_LARGE) != (is_of_tables ? KV_NODE_TABLE : 0)) {
        fault(look, "page %" PRIu64 " has an entry of an unknown kind", page);
        return MDB_CORRUPTED;
    }
    if (node->header.flags & KV_NODE_LARGE) {
        return check_large(look, node);
    }
    if (is_free_list(look)) {
        return check_free_list(look, node->value, node->value_bytes);
    }
    return is_of_tables ? note_table(look, node) : MDB_SUCCESS;
}

/* --- pages --------------------------------------------------------------------------------------
 */

/* Finds an entry; *ret_bytes is what it takes of the page. */
static int find_node(const struct look *look, const unsigned char *page, size_t index, bool is_leaf,
                     struct node *ret_node, size_t *ret_bytes)
{
    struct kv_page_header header;
    struct node node;
    uint16_t at = 0;
    memcpy(&header, page, sizeof header);
    memcpy(&at, page + sizeof header + index * sizeof at, sizeof at);
    if (at < header.size.gap.upper || at + sizeof node.header > look->page_bytes) {
        fault(look, "page %" PRIu64 " has an entry outside of it", header.number);
        return MDB_CORRUPTED;
    }
    memcpy(&node.header, page + at, sizeof node.header);
    bool is_large = is_leaf && (node.header.flags & KV_NODE_LARGE);
    node.value_bytes = is_large ? sizeof(uint64_t) : is_leaf ? node.header.low : 0;
    size_t bytes = sizeof node.header + node.header.key_bytes + node.value_bytes;
    if (bytes > look->page_bytes - at) {
        fault(look, "page %" PRIu64 " has an entry that goes beyond it", header.number);
        return MDB_CORRUPTED;
    }
    node.key = page + at + sizeof node.header;
    node.value = node.key + node.header.key_bytes;
    *ret_node = node;
    *ret_bytes = bytes + bytes % 2; /* they begin at even places */
    return MDB_SUCCESS;
}

static int check_page(struct look *look, uint64_t number, size_t level);

static int check_branch_entry(struct look *look, uint64_t page, size_t index,
                              const struct node *node, size_t level)
{
    uint64_t child = node->header.low | (uint64_t)node->header.flags << 32U;
    int code = index > 0 ? check_order(look, page, node, LAST_DIVIDER) : MDB_SUCCESS;
    return code == MDB_SUCCESS ? check_page(look, child, level + 1) : code;
}

static int check_entries(struct look *look, const unsigned char *page, size_t count, bool is_leaf,
                         size_t level)
{
    struct kv_page_header header;
    size_t taken = 0;
    memcpy(&header, page, sizeof header);
    for (size_t i = 0; i < count; i++) {
        struct node node;
        size_t bytes = 0;
        int code = find_node(look, page, i, is_leaf, &node, &bytes);
        if (code == MDB_SUCCESS) {
            code = is_leaf ? check_leaf_entry(look, header.number, &node)
                           : check_branch_entry(look, header.number, i, &node, level);
        }
        if (code != MDB_SUCCESS) {
            return code;
        }
        taken += bytes;
    }
    if (taken != look->page_bytes - header.size.gap.upper) {
        fault(look, "page %" PRIu64 " has gaps between its entries", header.number);
        return MDB_CORRUPTED;
    }
    return MDB_SUCCESS;
}

static int check_page(struct look *look, uint64_t number, size_t level)
{
    struct kv_page_header header;
    unsigned char *page = look->room + level * look->page_bytes;
    bool is_leaf = level + 1 == look->head->depth;
    int code = take_page(look, number);
    if (code == MDB_SUCCESS) {
        code = read_at(look, number * look->page_bytes, page, look->page_bytes);
    }
    if (code != MDB_SUCCESS) {
        return code;
    }
    memcpy(&header, page, sizeof header);
    size_t lower = header.size.gap.lower;
    if (header.number != number || header.flags != (is_leaf ? KV_PAGE_LEAF : KV_PAGE_BRANCH) ||
        lower <= sizeof header || lower % 2 != 0 || lower > header.size.gap.upper ||
        header.size.gap.upper > look->page_bytes) {
        fault(look, "page %" PRIu64 " is not the page that it should be", number);
        return MDB_CORRUPTED;
    }
    *(is_leaf ? &look->found.leaf_pages : &look->found.branch_pages) += 1;
    return check_entries(look, page, (lower - sizeof header) / 2, is_leaf, level);
}

/* --- tables -------------------------------------------------------------------------------------
 */

static int check_table(struct look *look, const char *name, const struct kv_table_head *head)
{
    look->table = name;
    look->head = head;
    look->found = (struct kv_table_head){0};
    look->last_kind = LAST_NONE;
    bool is_empty = head->root == UINT64_MAX;
    if (head->depth > MOST_LEVELS || (head->depth == 0) != is_empty ||
        (!is_free_list(look) && head->flags != 0)) {
        fault(look, "its head is damaged");
        return MDB_CORRUPTED;
    }
    int code = is_empty ? MDB_SUCCESS : check_page(look, head->root, 0);
    if (code == MDB_SUCCESS && (look->found.branch_pages != head->branch_pages ||
                                look->found.leaf_pages != head->leaf_pages ||
                                look->found.overflow_pages != head->overflow_pages ||
                                look->found.entries != head->entries)) {
        fault(look,
              "it holds %" PRIu64 " entries in %" PRIu64 " pages, and should %" PRIu64
              " in %" PRIu64,
              look->found.entries, look->found.leaf_pages, head->entries, head->leaf_pages);
        return MDB_CORRUPTED;
    }
    return code;
}

/* A fault was told, and does not keep from looking through the next one. */
static int check_tables(struct look *look)
{
    int code = check_table(look, "of tables", &look->roots.main);
    for (size_t i = 0; i < look->table_count && (code == MDB_SUCCESS || code == MDB_CORRUPTED);
         i++) {
        code = check_table(look, look->tables[i].name, &look->tables[i].head);
    }
    if (code == MDB_SUCCESS || code == MDB_CORRUPTED) {
        code = check_table(look, "of free pages", &look->roots.free);
    }
    return code;
}

/* The roots of the transaction's state; MDB_NOTFOUND when later commits have replaced them. */
static int read_roots(struct look *look, MDB_txn *txn)
{
    for (uint64_t i = 0; i < KV_FIRST_PAGE; i++) {
        int code = read_at(look, i * look->page_bytes + sizeof(struct kv_page_header), &look->roots,
                           sizeof look->roots);
        if (code != MDB_SUCCESS || look->roots.transaction == mdb_txn_id(txn)) {
            return code;
        }
    }
    return MDB_NOTFOUND;
}

static int look_through(struct look *look, MDB_env *env, MDB_txn *txn)
{
    MDB_stat status;
    int code = mdb_env_get_fd(env, &look->file);
    if (code == MDB_SUCCESS) {
        code = mdb_env_stat(env, &status);
    }
    if (code != MDB_SUCCESS) {
        return code;
    }
    look->page_bytes = status.ms_psize;
    look->table = "of tables";
    code = read_roots(look, txn);
    if (code != MDB_SUCCESS) {
        return code;
    }
    if (look->roots.last_page >= look->roots.map_bytes / look->page_bytes) {
        fault(look, "it has more pages than the map has room for");
        return MDB_CORRUPTED;
    }
    look->seen = calloc(1, look->roots.last_page / 8 + 1);
    look->room = malloc(MOST_LEVELS * look->page_bytes);
    code = look->seen && look->room ? check_tables(look) : ENOMEM;
    free(look->seen);
    free(look->room);
    return code;
}

int kv_check_pages(struct kv *kv, kv_tell tell, void *user, struct store_error *error)
{
    int code = MDB_NOTFOUND;
    for (int i = 0; i < MOST_TRIES && code == MDB_NOTFOUND; i++) {
        struct look look = {.tell = tell, .user = user};
        struct kv_txn *txn = NULL;
        int result = kv_begin(kv, false, &txn, error);
        if (result != STORE_OK) {
            return result;
        }
        code = look_through(&look, kv->env, txn->txn);
        kv_abort(txn);
    }
    if (code == MDB_CORRUPTED) { /* that was told */
        return STORE_OK;
    }
    return kv_translate(kv, code == MDB_NOTFOUND ? EBUSY : code, "looking through its pages",
                        error);
}
