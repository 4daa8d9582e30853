/*
 * The trainer with little memory, and where the model cannot be stored: in the end it knows the
 * same, to the last bit. The program's own pwrite and writev stand before those of the system, so
 * that a disk can be full, or take its time.
 */
#include "daemon/trainer.h"

#include <errno.h>
#include <setjmp.h>
#include <stdarg.h>
#include <stdatomic.h>
#include <stddef.h>
#include <stdint.h>
#include <sys/syscall.h>
#include <sys/uio.h>

#include <cmocka.h>
#include <sched.h>

#include "daemon/learner/model_parts.h"
#include "daemon/memory_shares.h"
#include "storage/model_view.h"
#include "tests/unit/repeatable.h"
#include "tests/unit/trainer_fixture.h"

/* --- a disk that can be full, or stuck -----------------------------------------------------------
 */

static atomic_bool disk_is_full;
static atomic_bool disk_is_stuck;

static void wait_for_disk(void)
{
    while (atomic_load(&disk_is_stuck)) {
        (void)sched_yield();
    }
}

ssize_t pwrite(int fd, const void *buf, size_t n, off_t offset)
{
    wait_for_disk();
    if (atomic_load(&disk_is_full)) {
        errno = ENOSPC;
        return -1;
    }
    return syscall(SYS_pwrite64, fd, buf, n, offset);
}

ssize_t writev(int fd, const struct iovec *iovec, int count)
{
    wait_for_disk();
    if (atomic_load(&disk_is_full)) {
        errno = ENOSPC;
        return -1;
    }
    return syscall(SYS_writev, fd, iovec, count);
}

/* --- entries, the same in every run --------------------------------------------------------------
 */

enum {
    MANY = 1000, /* changes the chunks of all words several times over */
    FEW = 400,
    WORDS = 6000,
    TAGS = 200,
    ENTRY_WORDS = 24,
    TEXT_BYTES = ENTRY_WORDS * 8,
    LITTLE_BUDGET_BYTES = 4 << 20, /* as if others had taken most of it */
    TINY_BUDGET_BYTES = 1 << 20,   /* or nearly all */
    SMALL_MAP_BYTES = 2 << 20
};

/* A word of every tag, then words of none: low numbers more often. */
static void entry_text(struct repeatable *random, uint32_t tag, char text[TEXT_BYTES])
{
    size_t used = (size_t)snprintf(text, TEXT_BYTES, "t%u", tag);
    for (int i = 1; i < ENTRY_WORDS; i++) {
        double share = repeatable_share(random);
        used += (size_t)snprintf(text + used, TEXT_BYTES - used, " w%u",
                                 (unsigned)(share * share * WORDS));
    }
}

static void file_entry(struct training *training, struct store_view *view, uint64_t number,
                       struct repeatable *random)
{
    char id[32];
    char text[TEXT_BYTES];
    char names[2][16];
    struct item_refusal refusal = {0};
    struct item_filed filed = {0};
    uint32_t tag = repeatable_below(random, TAGS);
    entry_text(random, tag, text);
    (void)snprintf(id, sizeof id, "log/%llu", (unsigned long long)number);
    (void)snprintf(names[0], sizeof names[0], "tag %u", tag);
    (void)snprintf(names[1], sizeof names[1], "tag %u", (tag + 1) % TAGS);
    const struct store_text tags[] = {text_of(names[0]), text_of(names[1])};
    const struct item_filing filing = {.id = text_of(id),
                                       .text = text_of(text),
                                       .tags = tags,
                                       .tag_count = 1 + repeatable_below(random, 2),
                                       .open_unknown = true};
    assert_int_equal(
        items_file(view, &filing, &training->store->buffer, &filed, &refusal, &training->error),
        STORE_OK);
}

/* Every eighth takes the place of one before. */
static void file_many(struct training *training, uint64_t count)
{
    struct repeatable random = {4};
    struct store_view *view = fixture_write(training->store);
    for (uint64_t i = 0; i < count; i++) {
        file_entry(training, view, i % 8 == 7 ? i / 2 : i, &random);
    }
    fixture_commit(view);
    commit(training);
}

/* --- two trainers over the same entries ----------------------------------------------------------
 */

struct pair {
    struct training *small; /* what is tested */
    struct training *large; /* has memory for everything, and stores once */
};

static int pair_set_up(void **state)
{
    struct pair *pair = calloc(1, sizeof *pair);
    assert_non_null(pair);
    atomic_store(&disk_is_full, false);
    (void)training_set_up((void **)&pair->small);
    (void)training_set_up((void **)&pair->large);
    *state = pair;
    return 0;
}

static int pair_tear_down(void **state)
{
    struct pair *pair = *state;
    atomic_store(&disk_is_full, false);
    atomic_store(&disk_is_stuck, false);
    (void)training_tear_down((void **)&pair->small);
    (void)training_tear_down((void **)&pair->large);
    free(pair);
    return 0;
}

static uint64_t changed_bytes(struct training *training)
{
    shared_model_read(&training->shared);
    uint64_t bytes = model_changed_bytes(training->shared.model);
    shared_model_unlock(&training->shared);
    return bytes;
}

static uint64_t learned_so_far(struct training *training)
{
    return backlog_read(training->backlog).learned;
}

/* What one entry may add before it is looked at again: a chunk for each word and what lists it. */
static const uint64_t ONE_ENTRY_BYTES = (uint64_t)ENTRY_WORDS * 2 * 8192;

/* What may wait to be stored of a little budget. */
static uint64_t little_room(void)
{
    return memory_shares_of(LITTLE_BUDGET_BYTES, 0).changed;
}

/* The most that waited to be stored, of what was seen until all is learned. */
static uint64_t most_changed(struct training *training, uint64_t last)
{
    uint64_t most = 0;
    while (learned_so_far(training) < last) {
        uint64_t bytes = changed_bytes(training);
        most = bytes > most ? bytes : most;
        (void)sched_yield();
    }
    return most;
}

/* --- the same to the last bit --- */

enum {
    GAPS = 64
};

struct reply {
    struct model_gap gaps[GAPS];
    size_t count;
    double expected;
};

static struct reply ask(struct training *training, const char *text)
{
    struct reply reply = {.count = 0};
    struct workspace *workspace = workspaces_borrow(&training->workspaces);
    const struct features_source source = {.text = text, .text_bytes = strlen(text)};
    struct model_answer answer;
    struct model_base base;
    assert_non_null(workspace);
    assert_int_equal(features_extract(workspace->features, &source, SIZE_MAX), 0);
    const struct model_question question = {.features = features_list(workspace->features),
                                            .feature_count = features_count(workspace->features),
                                            .most = GAPS};
    shared_model_read(&training->shared);
    model_base_enter(&base, training->model_store);
    model_scratch_read(workspace->scratch, &base.base);
    assert_int_equal(model_ask(training->shared.model, &question, workspace->scratch, &answer), 0);
    reply.count = answer.gap_count;
    reply.expected = answer.expected;
    memcpy(reply.gaps, answer.gaps, answer.gap_count * sizeof *answer.gaps);
    model_scratch_read(workspace->scratch, NULL);
    model_base_leave(&base);
    shared_model_unlock(&training->shared);
    workspaces_return(&training->workspaces, workspace);
    return reply;
}

static void assert_same_reply(const struct pair *pair, const char *text)
{
    struct reply small = ask(pair->small, text);
    struct reply large = ask(pair->large, text);
    assert_true(large.count > 0);
    assert_int_equal(small.count, large.count);
    assert_true(small.expected == large.expected);
    for (size_t i = 0; i < large.count; i++) {
        assert_int_equal(small.gaps[i].tag, large.gaps[i].tag);
        assert_true(small.gaps[i].chance == large.gaps[i].chance);
        assert_true(small.gaps[i].score == large.gaps[i].score);
    }
}

static struct model_view *look(struct training *training)
{
    struct model_view *view = NULL;
    assert_int_equal(model_view_open(training->model_store, &view, &training->error), STORE_OK);
    return view;
}

/* Entries hold the same but for the scores, whose age depends on when there was time. */
static void assert_same_entries(const struct pair *pair, uint64_t most)
{
    struct model_view *views[2] = {look(pair->small), look(pair->large)};
    struct model_store_entry found[2] = {{0}, {0}};
    struct store_error *error = &pair->small->error;
    uint64_t count = 0;
    while (model_view_entry_after(views[1], found[1].number, &found[1], error) == STORE_OK) {
        assert_int_equal(model_view_entry_after(views[0], found[0].number, &found[0], error),
                         STORE_OK);
        assert_int_equal(found[0].number, found[1].number);
        assert_int_equal(found[0].counted, found[1].counted);
        size_t pairs = found[1].pairs.count;
        assert_int_equal(found[0].pairs.count, pairs);
        assert_memory_equal(found[0].pairs.tags, found[1].pairs.tags, pairs * sizeof(uint32_t));
        assert_memory_equal(found[0].pairs.values, found[1].pairs.values,
                            pairs * MODEL_STORE_PAIR_VALUES * sizeof(float));
        count++;
    }
    assert_int_equal(model_view_entry_after(views[0], found[0].number, &found[0], error),
                     STORE_NOT_FOUND);
    assert_true(count > most / 2);
    model_view_close(views[0]);
    model_view_close(views[1]);
}

/* Chunk by chunk, as they are with their news. */
static void assert_same_chunks(const struct pair *pair)
{
    struct model_view *views[2] = {look(pair->small), look(pair->large)};
    struct store_error *error = &pair->small->error;
    struct model_store_head head;
    struct kv_bytes found[2] = {{0}, {0}};
    uint64_t count = 0;
    assert_int_equal(model_store_read_head(pair->large->model_store, &head, error), STORE_OK);
    for (uint32_t word = 0; word < head.next_word; word++) {
        uint32_t number = 0;
        while (model_view_chunk(views[1], word, number, &found[1], error) == STORE_OK) {
            assert_int_equal(model_view_chunk(views[0], word, number++, &found[0], error),
                             STORE_OK);
            assert_int_equal(found[0].size, found[1].size);
            assert_memory_equal(found[0].data, found[1].data, found[1].size);
            count++;
        }
        assert_int_equal(model_view_chunk(views[0], word, number, &found[0], error),
                         STORE_NOT_FOUND);
    }
    assert_true(count > head.words / 2);
    model_view_close(views[0]);
    model_view_close(views[1]);
}

/* As model_store.c names them; without the worklist, whose scores may differ in age, and chunks. */
static const char *const tables[] = {"words", "counts", "tags", "figures"};

enum {
    TABLES = 4,
    FIGURES = 3
};

/* The closed model's tables. */
static struct kv *open_tables(struct training *training)
{
    char directory[FIXTURE_PATH_BYTES + 8];
    struct kv *kv = NULL;
    (void)snprintf(directory, sizeof directory, "%s/model", training->store->home);
    const struct kv_settings settings = {.directory = directory,
                                         .map_bytes = FIXTURE_MAP_BYTES,
                                         .tables = tables,
                                         .table_count = TABLES};
    assert_int_equal(kv_open(&settings, &kv, &training->error), STORE_OK);
    return kv;
}

struct walk {
    struct kv_txn *txn;
    struct kv_cursor *cursor;
    struct kv_bytes key;
    struct kv_bytes value;
    struct store_error error;
};

static int step(struct walk *walk, unsigned table, bool is_first)
{
    static const unsigned char first = 0;
    int result = is_first ? kv_seek(walk->cursor, kv_bytes_of(&first, 1), &walk->key, &walk->value,
                                    &walk->error)
                          : kv_next(walk->cursor, &walk->key, &walk->value, &walk->error);
    /* A key of figures begins with four bytes of their kind, the greatest first. */
    bool is_skipped = result == STORE_OK && table == FIGURES &&
                      ((const unsigned char *)walk->key.data)[3] == MODEL_FIGURES_WORKLIST;
    return is_skipped ? step(walk, table, false) : result;
}

static void walk_begin(struct walk *walk, struct kv *kv, unsigned table)
{
    *walk = (struct walk){0};
    assert_int_equal(kv_begin(kv, false, &walk->txn, &walk->error), STORE_OK);
    assert_int_equal(kv_cursor_open(walk->txn, table, &walk->cursor, &walk->error), STORE_OK);
}

static void walk_end(struct walk *walk)
{
    kv_cursor_close(walk->cursor);
    kv_abort(walk->txn);
}

static void assert_same_table(struct kv *small, struct kv *large, unsigned table)
{
    struct walk one;
    struct walk other;
    size_t count = 0;
    walk_begin(&one, small, table);
    walk_begin(&other, large, table);
    while (step(&other, table, count == 0) == STORE_OK) {
        assert_int_equal(step(&one, table, count == 0), STORE_OK);
        assert_int_equal(one.key.size, other.key.size);
        assert_memory_equal(one.key.data, other.key.data, one.key.size);
        assert_int_equal(one.value.size, other.value.size);
        assert_memory_equal(one.value.data, other.value.data, one.value.size);
        count++;
    }
    assert_int_equal(step(&one, table, count == 0), STORE_NOT_FOUND);
    assert_true(count > 0);
    walk_end(&one);
    walk_end(&other);
}

/* Learns with the large one what the small one has learned, stops both and compares. */
static void assert_same_in_the_end(const struct pair *pair, uint64_t count)
{
    file_many(pair->large, count);
    start(pair->large);
    assert_int_equal(learned(pair->large), count);
    assert_same_reply(pair, "t3 w5 w77 w1200");
    assert_same_reply(pair, "t150 w1 w2 w3 w4 w2500 w5000");
    stop(pair->small);
    stop(pair->large);
    assert_int_equal(pair->large->kept_count, 1);
    assert_same_entries(pair, count);
    assert_same_chunks(pair);
    close_model(pair->small);
    close_model(pair->large);
    struct kv *small = open_tables(pair->small);
    struct kv *large = open_tables(pair->large);
    for (unsigned table = 0; table < TABLES; table++) {
        assert_same_table(small, large, table);
    }
    kv_close(small);
    kv_close(large);
}

/* --- little memory ------------------------------------------------------------------------------
 */

static void with_a_little_budget_the_model_is_stored_in_between_and_the_same(void **state)
{
    struct pair *pair = *state;
    struct training *small = pair->small;
    small->settings.memory_bytes = LITTLE_BUDGET_BYTES;
    file_many(small, MANY);
    start(small);
    assert_true(most_changed(small, MANY) <= little_room() + ONE_ENTRY_BYTES);
    assert_true(backlog_read(small->backlog).kept > 0);
    assert_same_in_the_end(pair, MANY);
    assert_true(small->kept_count >= 3); /* one of them at the end */
}

static void with_next_to_no_memory_it_is_the_same_still(void **state)
{
    struct pair *pair = *state;
    struct training *small = pair->small;
    small->settings.memory_bytes = TINY_BUDGET_BYTES;
    file_many(small, FEW);
    start(small);
    assert_int_equal(learned(small), FEW);
    assert_same_in_the_end(pair, FEW);
    assert_true(small->kept_count >= FEW / 10);
}

/* Once all is stored only what an entry has brought in is above its share: words of a few hundred
 * bytes, and chunks of at most 2,000. */
static void words_and_weights_keep_to_their_shares(void **state)
{
    struct pair *pair = *state;
    struct training *small = pair->small;
    small->settings.memory_bytes = TINY_BUDGET_BYTES;
    const struct memory_shares shares = memory_shares_of(TINY_BUDGET_BYTES, 0);
    file_many(small, FEW);
    start(small);
    assert_int_equal(learned(small), FEW);
    struct model_size held = size_of(small);
    assert_true(held.dictionary_bytes <= shares.dictionary + shares.changed);
    assert_true(held.weights_bytes <= shares.weights + shares.changed);
    file_many(pair->large, FEW);
    start(pair->large);
    assert_int_equal(learned(pair->large), FEW);
    assert_true(size_of(pair->large).weights_bytes > shares.weights + shares.changed);
}

/* --- while the model is being stored ------------------------------------------------------------
 */

static void learning_and_asking_go_on_while_the_model_is_being_stored(void **state)
{
    struct pair *pair = *state;
    struct training *small = pair->small;
    small->settings.flush_changes = 1;
    file_many(small, FEW);
    atomic_store(&disk_is_stuck, true);
    start(small);
    assert_int_equal(learned(small), FEW);
    assert_int_equal(backlog_read(small->backlog).kept, 0);
    assert_true(ask(small, "t3 w5 w77 w1200").count > 0);
    atomic_store(&disk_is_stuck, false);
    while (backlog_read(small->backlog).kept < FEW) {
        (void)sched_yield();
    }
    assert_same_in_the_end(pair, FEW);
}

static void with_little_memory_learning_waits_for_what_is_being_stored(void **state)
{
    struct pair *pair = *state;
    struct training *small = pair->small;
    small->settings.memory_bytes = LITTLE_BUDGET_BYTES;
    small->settings.flush_changes = 1;
    file_many(small, MANY);
    atomic_store(&disk_is_stuck, true);
    start(small);
    while (changed_bytes(small) <= little_room()) {
        (void)sched_yield();
    }
    assert_true(learned_so_far(small) < MANY);
    atomic_store(&disk_is_stuck, false);
    assert_true(most_changed(small, MANY) <= little_room() + ONE_ENTRY_BYTES);
    assert_same_in_the_end(pair, MANY);
}

/* --- no room for the model ----------------------------------------------------------------------
 */

static void wait_for_trouble(struct training *training, char sentence[TROUBLE_BYTES])
{
    do {
        (void)sched_yield();
        troubles_read(&training->troubles, TROUBLE_KEEPING, sentence);
    } while (sentence[0] == '\0');
}

/* It is told, and no more is learned than there is memory for. */
static void assert_held_up(struct training *training, const char *reason)
{
    char sentence[TROUBLE_BYTES];
    wait_for_trouble(training, sentence);
    assert_non_null(strstr(sentence, "what was learned cannot be stored ("));
    assert_non_null(strstr(sentence, reason));
    while (changed_bytes(training) <= little_room()) {
        (void)sched_yield();
    }
    assert_true(learned_so_far(training) < MANY);
    assert_true(changed_bytes(training) <= little_room() + ONE_ENTRY_BYTES);
}

/* Has the small one learn until it must store the model and cannot. */
static void fill_disk(struct training *small)
{
    small->settings.memory_bytes = LITTLE_BUDGET_BYTES;
    file_many(small, MANY);
    atomic_store(&disk_is_full, true);
    start(small);
    assert_held_up(small, "is full");
}

static void a_model_that_has_no_room_waits_for_a_larger_map_and_is_the_same(void **state)
{
    struct pair *pair = *state;
    struct training *small = pair->small;
    char sentence[TROUBLE_BYTES];
    close_model(small);
    small->model_settings.map_bytes = SMALL_MAP_BYTES;
    open_model(small);
    small->settings.memory_bytes = LITTLE_BUDGET_BYTES;
    file_many(small, MANY);
    start(small);
    assert_held_up(small, "model has reached its largest size");
    uint64_t kept = backlog_read(small->backlog).kept;
    assert_true(kept > 0);
    stop(small); /* does not wait for room */
    assert_true(small->shared.learned < MANY);
    close_model(small);
    small->model_settings.map_bytes = FIXTURE_MAP_BYTES;
    open_model(small);
    assert_int_equal(small->shared.learned, kept); /* as it was stored last */
    commit(small);
    start(small);
    assert_int_equal(learned(small), MANY);
    assert_same_in_the_end(pair, MANY);
    troubles_read(&small->troubles, TROUBLE_KEEPING, sentence);
    assert_string_equal(sentence, "");
}

static void learning_goes_on_when_the_disk_has_room_again(void **state)
{
    struct pair *pair = *state;
    struct training *small = pair->small;
    char sentence[TROUBLE_BYTES];
    fill_disk(small);
    assert_int_equal(backlog_read(small->backlog).kept, 0);
    atomic_store(&disk_is_full, false);
    (void)most_changed(small, MANY);
    troubles_read(&small->troubles, TROUBLE_KEEPING, sentence);
    assert_string_equal(sentence, "");
    assert_same_in_the_end(pair, MANY);
}

/* All is committed and promised at once, and neither who asks nor the writer waits for it. */
static void while_the_model_cannot_be_stored_nobody_waits_for_learning(void **state)
{
    struct pair *pair = *state;
    struct training *small = pair->small;
    fill_disk(small);
    assert_true(learned(small) < MANY);
    assert_true(ask(small, "t3 w5 w77 w1200").count > 0);
    assert_true(backlog_wait_for_room(small->backlog) == UINT64_MAX);
}

#define TEST(name) cmocka_unit_test_setup_teardown(name, pair_set_up, pair_tear_down)

int main(void)
{
    const struct CMUnitTest tests[] = {
        TEST(with_a_little_budget_the_model_is_stored_in_between_and_the_same),
        TEST(with_next_to_no_memory_it_is_the_same_still),
        TEST(words_and_weights_keep_to_their_shares),
        TEST(learning_and_asking_go_on_while_the_model_is_being_stored),
        TEST(with_little_memory_learning_waits_for_what_is_being_stored),
        TEST(a_model_that_has_no_room_waits_for_a_larger_map_and_is_the_same),
        TEST(learning_goes_on_when_the_disk_has_room_again),
        TEST(while_the_model_cannot_be_stored_nobody_waits_for_learning),
    };
    return cmocka_run_group_tests_name("trainer and memory", tests, NULL, NULL);
}
