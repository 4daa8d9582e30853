/*
 * A word in memory is on one of five lists. It comes as *clean* from the base, or as *changed*
 * when it is new; a clean word whose count is set becomes changed; a word that is removed becomes
 * *forgotten*. Sealing makes the changed *sealed* and the forgotten *leaving*; a sealed word may be
 * changed or forgotten once more. What is stored then becomes clean, or is let go. Only clean words
 * may be trimmed, since the base has them as they are.
 *
 * The table by term has the latest word of each term, be it forgotten: that is how the dictionary
 * knows not to look for it in the base. When the term comes again its new word takes that place,
 * and the forgotten one is on its list only (a leaving one likewise). The table by number has the
 * words that are not forgotten.
 *
 * All that can fail in dictionary_intern comes before the first change.
 */
#include "daemon/text/dictionary.h"

#include <assert.h>
#include <errno.h>
#include <stdlib.h>
#include <string.h>

#include "daemon/text/dictionary_table.h"

struct entry_list {
    struct dictionary_entry *first;
    struct dictionary_entry *last;
    size_t count;
};

struct dictionary {
    struct siphash_key key;
    struct dictionary_totals totals;
    struct dictionary_table by_term;
    struct dictionary_table by_number;
    struct entry_list
        lists[DICTIONARY_STATES]; /* by state, in the order in which words came to it */
    uint64_t entry_bytes;
    size_t new_count; /* words that are not forgotten and whose numbers are not stored */
};

/* What the allocator adds to a block, about. */
enum {
    BLOCK_BYTES = 16
};

int dictionary_new(const struct siphash_key *key, struct dictionary **ret_dictionary)
{
    struct dictionary *made = calloc(1, sizeof *made);
    if (!made) {
        return -ENOMEM;
    }
    made->key = *key;
    if (dictionary_table_init(&made->by_term, DICTIONARY_BY_TERM, &made->key) < 0 ||
        dictionary_table_init(&made->by_number, DICTIONARY_BY_NUMBER, &made->key) < 0) {
        dictionary_free(made);
        return -ENOMEM;
    }
    *ret_dictionary = made;
    return 0;
}

static void free_list(struct entry_list *list)
{
    for (struct dictionary_entry *entry = list->first; entry;) {
        struct dictionary_entry *after = entry->after;
        free(entry);
        entry = after;
    }
    *list = (struct entry_list){0};
}

void dictionary_free(struct dictionary *dictionary)
{
    if (!dictionary) {
        return;
    }
    for (size_t i = 0; i < DICTIONARY_STATES; i++) {
        free_list(&dictionary->lists[i]);
    }
    dictionary_table_deinit(&dictionary->by_term);
    dictionary_table_deinit(&dictionary->by_number);
    free(dictionary);
}

void dictionary_totals(const struct dictionary *dictionary, struct dictionary_totals *ret_totals)
{
    *ret_totals = dictionary->totals;
}

int dictionary_restore_totals(struct dictionary *dictionary, const struct dictionary_totals *totals)
{
    if (totals->size > totals->next_number) {
        return -EINVAL;
    }
    dictionary->totals = *totals;
    return 0;
}

/* --- lists and blocks ---------------------------------------------------------------------------
 */

static void append(struct dictionary *dictionary, struct dictionary_entry *entry,
                   enum dictionary_state state)
{
    struct entry_list *list = &dictionary->lists[state];
    entry->state = (unsigned char)state;
    entry->before = list->last;
    entry->after = NULL;
    *(list->last ? &list->last->after : &list->first) = entry;
    list->last = entry;
    list->count++;
}

static void unlink_entry(struct dictionary *dictionary, struct dictionary_entry *entry)
{
    struct entry_list *list = &dictionary->lists[entry->state];
    *(entry->before ? &entry->before->after : &list->first) = entry->after;
    *(entry->after ? &entry->after->before : &list->last) = entry->before;
    list->count--;
}

static void move(struct dictionary *dictionary, struct dictionary_entry *entry,
                 enum dictionary_state state)
{
    unlink_entry(dictionary, entry);
    append(dictionary, entry, state);
}

static uint64_t block_bytes(size_t term_bytes)
{
    return sizeof(struct dictionary_entry) + term_bytes + BLOCK_BYTES;
}

/* Lets a word go from memory. */
static void drop(struct dictionary *dictionary, struct dictionary_entry *entry)
{
    unlink_entry(dictionary, entry);
    dictionary_table_take_out(&dictionary->by_term, entry);
    dictionary_table_take_out(&dictionary->by_number, entry);
    dictionary->entry_bytes -= block_bytes(entry->bytes);
    free(entry);
}

/* --- looking up ---------------------------------------------------------------------------------
 */

/* Whether there are words in the base that are not in memory. */
static bool has_let_go(const struct dictionary *dictionary)
{
    const struct entry_list *lists = dictionary->lists;
    return dictionary->totals.size > lists[DICTIONARY_CLEAN].count +
                                         lists[DICTIONARY_CHANGED].count +
                                         lists[DICTIONARY_SEALED].count;
}

static int read_base(const struct dictionary *dictionary, const struct base *base, const char *term,
                     size_t bytes, struct base_word *ret_found)
{
    struct base_word found = {0};
    if (!base || !has_let_go(dictionary)) {
        return -ENOENT;
    }
    int result = base->word(base->user, term, bytes, &found);
    if (result < 0) {
        return result;
    }
    /* A number that was never given out, or that another term has. */
    if (found.number >= dictionary->totals.next_number ||
        dictionary_table_find_number(&dictionary->by_number, found.number)) {
        return -EIO;
    }
    *ret_found = found;
    return 0;
}

static bool is_forgotten(const struct dictionary_entry *entry)
{
    return entry->state == DICTIONARY_FORGOTTEN || entry->state == DICTIONARY_LEAVING;
}

int dictionary_find(const struct dictionary *dictionary, const struct base *base, const char *term,
                    size_t bytes, struct base_word *ret_found)
{
    uint32_t hash = dictionary_table_hash(&dictionary->key, term, bytes);
    const struct dictionary_entry *entry =
        dictionary_table_find_term(&dictionary->by_term, hash, term, bytes);
    if (!entry) {
        return read_base(dictionary, base, term, bytes, ret_found);
    }
    if (is_forgotten(entry)) {
        return -ENOENT;
    }
    *ret_found = (struct base_word){.number = entry->number, .count = entry->count};
    return 0;
}

static struct dictionary_entry *entry_of(const struct dictionary *dictionary, uint32_t word)
{
    struct dictionary_entry *entry = dictionary_table_find_number(&dictionary->by_number, word);
    assert(entry); /* the caller interned it */
    return entry;
}

uint32_t dictionary_count(const struct dictionary *dictionary, uint32_t word)
{
    return entry_of(dictionary, word)->count;
}

const char *dictionary_term(const struct dictionary *dictionary, uint32_t word, size_t *ret_bytes)
{
    const struct dictionary_entry *entry = entry_of(dictionary, word);
    *ret_bytes = entry->bytes;
    return entry->term;
}

/* --- coming and going ---------------------------------------------------------------------------
 */

/* An entry on no list and in no table, for which there is room in both. NULL: no memory. */
static struct dictionary_entry *make_entry(struct dictionary *dictionary, const char *term,
                                           size_t bytes)
{
    if (bytes > SIZE_MAX - sizeof(struct dictionary_entry) ||
        dictionary_table_reserve(&dictionary->by_term) < 0 ||
        dictionary_table_reserve(&dictionary->by_number) < 0) {
        return NULL;
    }
    struct dictionary_entry *entry = malloc(sizeof *entry + bytes);
    if (!entry) {
        return NULL;
    }
    *entry = (struct dictionary_entry){
        .bytes = bytes, .hash = dictionary_table_hash(&dictionary->key, term, bytes)};
    memcpy(entry->term, term, bytes);
    return entry;
}

/* Takes a word of a term into memory that has none, or a forgotten one, there. */
static int place(struct dictionary *dictionary, const char *term, size_t bytes,
                 const struct base_word *word, enum dictionary_state state)
{
    struct dictionary_entry *entry = make_entry(dictionary, term, bytes);
    if (!entry) {
        return -ENOMEM;
    }
    entry->number = word->number;
    entry->count = word->count;
    entry->is_stored = state == DICTIONARY_CLEAN;
    const struct dictionary_entry *forgotten =
        dictionary_table_find_term(&dictionary->by_term, entry->hash, term, bytes);
    if (forgotten) {
        dictionary_table_take_out(&dictionary->by_term, forgotten);
    }
    dictionary_table_add(&dictionary->by_term, entry);
    dictionary_table_add(&dictionary->by_number, entry);
    append(dictionary, entry, state);
    dictionary->entry_bytes += block_bytes(bytes);
    return 0;
}

static int add_new(struct dictionary *dictionary, const char *term, size_t bytes,
                   uint32_t *ret_word)
{
    const struct base_word word = {.number = dictionary->totals.next_number, .count = 0};
    if (word.number == DICTIONARY_NONE ||
        place(dictionary, term, bytes, &word, DICTIONARY_CHANGED) < 0) {
        return -ENOMEM;
    }
    dictionary->new_count++;
    dictionary->totals.next_number++;
    dictionary->totals.size++;
    *ret_word = word.number;
    return 0;
}

/* Looks for a term that is not in memory in the base. */
static int admit(struct dictionary *dictionary, const struct base *base, const char *term,
                 size_t bytes, uint32_t *ret_word)
{
    struct base_word found = {0};
    int result = read_base(dictionary, base, term, bytes, &found);
    if (result == 0) {
        result = place(dictionary, term, bytes, &found, DICTIONARY_CLEAN);
    }
    if (result == 0) {
        *ret_word = found.number;
    }
    return result;
}

int dictionary_intern(struct dictionary *dictionary, const struct base *base, const char *term,
                      size_t bytes, uint32_t *ret_word)
{
    uint32_t hash = dictionary_table_hash(&dictionary->key, term, bytes);
    struct dictionary_entry *entry =
        dictionary_table_find_term(&dictionary->by_term, hash, term, bytes);
    if (entry && !is_forgotten(entry)) {
        entry->is_recent = true;
        *ret_word = entry->number;
        return 0;
    }
    int result = entry ? -ENOENT : admit(dictionary, base, term, bytes, ret_word);
    return result == -ENOENT ? add_new(dictionary, term, bytes, ret_word) : result;
}

void dictionary_set_count(struct dictionary *dictionary, uint32_t word, uint32_t count)
{
    struct dictionary_entry *entry = entry_of(dictionary, word);
    entry->count = count;
    if (entry->state != DICTIONARY_CHANGED) {
        move(dictionary, entry, DICTIONARY_CHANGED);
    }
}

void dictionary_remove(struct dictionary *dictionary, uint32_t word)
{
    struct dictionary_entry *entry = entry_of(dictionary, word);
    dictionary_table_take_out(&dictionary->by_number, entry);
    move(dictionary, entry, DICTIONARY_FORGOTTEN);
    entry->count = 0;
    dictionary->new_count -= entry->is_stored ? 0 : 1;
    dictionary->totals.size--;
}

/* --- storing and trimming -----------------------------------------------------------------------
 */

static int tell(const struct entry_list *list,
                int (*told)(void *user, const struct dictionary_word *word), void *user)
{
    int result = 0;
    for (const struct dictionary_entry *entry = list->first; entry && result == 0;
         entry = entry->after) {
        const struct dictionary_word word = {.term = entry->term,
                                             .term_bytes = entry->bytes,
                                             .number = entry->number,
                                             .count = entry->count,
                                             .is_new = !entry->is_stored};
        result = told(user, &word);
    }
    return result;
}

int dictionary_changes(const struct dictionary *dictionary,
                       int (*put)(void *user, const struct dictionary_word *word),
                       int (*gone)(void *user, const struct dictionary_word *word), void *user)
{
    int result = tell(&dictionary->lists[DICTIONARY_LEAVING], gone, user);
    if (result == 0) {
        result = tell(&dictionary->lists[DICTIONARY_FORGOTTEN], gone, user);
    }
    if (result == 0) {
        result = tell(&dictionary->lists[DICTIONARY_SEALED], put, user);
    }
    return result == 0 ? tell(&dictionary->lists[DICTIONARY_CHANGED], put, user) : result;
}

/* Moves at most *left words, and counts them down. */
static void move_some(struct dictionary *dictionary, enum dictionary_state from,
                      enum dictionary_state to, size_t *left)
{
    for (; *left > 0 && dictionary->lists[from].first; (*left)--) {
        move(dictionary, dictionary->lists[from].first, to);
    }
}

bool dictionary_seal(struct dictionary *dictionary)
{
    size_t left = DICTIONARY_STEP;
    move_some(dictionary, DICTIONARY_CHANGED, DICTIONARY_SEALED, &left);
    move_some(dictionary, DICTIONARY_FORGOTTEN, DICTIONARY_LEAVING, &left);
    return left == 0;
}

bool dictionary_stored(struct dictionary *dictionary)
{
    size_t left = DICTIONARY_STEP;
    for (; left > 0 && dictionary->lists[DICTIONARY_LEAVING].first; left--) {
        drop(dictionary, dictionary->lists[DICTIONARY_LEAVING].first);
    }
    for (; left > 0 && dictionary->lists[DICTIONARY_SEALED].first; left--) {
        struct dictionary_entry *entry = dictionary->lists[DICTIONARY_SEALED].first;
        dictionary->new_count -= entry->is_stored ? 0 : 1;
        entry->is_stored = true;
        move(dictionary, entry, DICTIONARY_CLEAN);
    }
    return left == 0;
}

void dictionary_clean(struct dictionary *dictionary)
{
    while (dictionary_seal(dictionary)) {
    }
    while (dictionary_stored(dictionary)) {
    }
}

/* The clean words are a queue: the one in front goes, unless it was interned again since it came to
 * the queue or since it was in front last; then it has a second chance at the end. */
void dictionary_trim(struct dictionary *dictionary, uint64_t bytes)
{
    struct dictionary_entry *front = dictionary->lists[DICTIONARY_CLEAN].first;
    for (size_t left = DICTIONARY_TRIM; left > 0 && front && dictionary_bytes(dictionary) > bytes;
         left--) {
        if (front->is_recent) {
            front->is_recent = false;
            move(dictionary, front, DICTIONARY_CLEAN);
        } else {
            drop(dictionary, front);
        }
        front = dictionary->lists[DICTIONARY_CLEAN].first;
    }
}

size_t dictionary_changed_count(const struct dictionary *dictionary)
{
    size_t all = 0;
    for (size_t state = 0; state < DICTIONARY_STATES; state++) {
        all += state == DICTIONARY_CLEAN ? 0 : dictionary->lists[state].count;
    }
    return all;
}

size_t dictionary_changed_terms(const struct dictionary *dictionary)
{
    return dictionary->new_count + dictionary->lists[DICTIONARY_FORGOTTEN].count +
           dictionary->lists[DICTIONARY_LEAVING].count;
}

size_t dictionary_size(const struct dictionary *dictionary)
{
    return dictionary->totals.size;
}

uint64_t dictionary_bytes(const struct dictionary *dictionary)
{
    return sizeof *dictionary + dictionary_table_bytes(&dictionary->by_term) +
           dictionary_table_bytes(&dictionary->by_number) + dictionary->entry_bytes;
}
