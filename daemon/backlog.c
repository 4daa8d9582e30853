#include "daemon/backlog.h"

#include <errno.h>
#include <pthread.h>
#include <stdlib.h>

#include "daemon/sync.h"

enum {
    MARKS = 256,
    COST_OF_A_CHANGE = 400, /* counts move and a few tags are learned whatever the text */
    COST_OF_A_TAG = 60,
    ROOM_LEAST = 100 * 1000,     /* cost that may always wait, some 100 short items */
    ROOM_PART = 8,               /* of the room must be there before more is committed */
    RATE_FIRST = 2 * 1000 * 1000 /* cost a second, until measured: less than any machine does */
};

/* The share of the promised time that the writer lets the trainer be behind. */
static const double BEHIND_SHARE = 0.4;

/* The share of what is learned that may be committed while the backlog of a start is learned, so
 * that it does end. */
static const double CATCH_UP_SHARE = 0.5;

/* How fast the measured rate follows what is measured, per second of learning. */
static const double RATE_FOLLOWS = 4.0;

/* What was committed when. */
struct mark {
    uint64_t seq;
    uint64_t at_ms;
};

struct backlog {
    pthread_mutex_t mutex;
    pthread_cond_t committed_more;
    pthread_cond_t learned_more;
    struct backlog_numbers numbers;
    uint64_t visible_within_ms;
    uint64_t
        found; /* up to here was there at the start, or came while that was learned: not promised */
    uint64_t catch_up_room;   /* cost that may be committed meanwhile */
    uint64_t cost_behind;     /* of what is committed, not learned, and promised */
    double rate;              /* cost a second that the trainer does */
    struct mark marks[MARKS]; /* a ring, rising in both members: what is not learned yet */
    size_t first_mark;
    size_t mark_count;
    uint64_t held[BACKLOG_HOLDERS]; /* what each has passed; UINT64_MAX: it holds nothing */
    bool nudged;
    bool trainer_failed;
    bool trainer_waits;
    bool stopping;
    struct heartbeat heartbeat; /* not under the mutex */
};

int backlog_new(const struct backlog_start *start, struct backlog **ret_backlog)
{
    struct backlog *backlog = calloc(1, sizeof *backlog);
    if (!backlog) {
        return -ENOMEM;
    }
    backlog->numbers = (struct backlog_numbers){
        .committed = start->committed, .learned = start->learned, .kept = start->learned};
    backlog->found = start->committed;
    backlog->visible_within_ms = start->visible_within_ms;
    backlog->rate = RATE_FIRST;
    backlog->catch_up_room = ROOM_LEAST;
    for (int i = 0; i < BACKLOG_HOLDERS; i++) {
        backlog->held[i] = UINT64_MAX;
    }
    int code = -pthread_mutex_init(&backlog->mutex, NULL);
    if (code < 0) {
        goto fail_mutex;
    }
    code = sync_init_condition(&backlog->committed_more);
    if (code < 0) {
        goto fail_committed;
    }
    code = sync_init_condition(&backlog->learned_more);
    if (code < 0) {
        goto fail_learned;
    }
    *ret_backlog = backlog;
    return 0;
fail_learned:
    (void)pthread_cond_destroy(&backlog->committed_more);
fail_committed:
    (void)pthread_mutex_destroy(&backlog->mutex);
fail_mutex:
    free(backlog);
    return code;
}

void backlog_free(struct backlog *backlog)
{
    if (!backlog) {
        return;
    }
    (void)pthread_cond_destroy(&backlog->learned_more); /* nobody waits any more */
    (void)pthread_cond_destroy(&backlog->committed_more);
    (void)pthread_mutex_destroy(&backlog->mutex);
    free(backlog);
}

uint64_t backlog_cost(size_t text_bytes, size_t tags)
{
    return COST_OF_A_CHANGE + text_bytes + COST_OF_A_TAG * tags;
}

/* --- writer -------------------------------------------------------------------------------------
 */

/* While the backlog of a start is being learned nothing is promised, and what is committed
 * meanwhile joins it. */
static bool is_catching_up(const struct backlog *backlog)
{
    return backlog->numbers.learned < backlog->found;
}

/* Of what is promised: all of the room that there may be. */
static uint64_t room_at_most(const struct backlog *backlog)
{
    double most = backlog->rate * (double)backlog->visible_within_ms / 1000.0 * BEHIND_SHARE;
    return most > ROOM_LEAST ? (uint64_t)most : ROOM_LEAST;
}

static uint64_t room(const struct backlog *backlog)
{
    if (is_catching_up(backlog)) {
        return backlog->catch_up_room;
    }
    uint64_t limit = room_at_most(backlog);
    return backlog->cost_behind < limit ? limit - backlog->cost_behind : 0;
}

/* Whether there is enough of it: a commit costs as much for a few changes as for many. */
static bool has_room(const struct backlog *backlog)
{
    return is_catching_up(backlog) ? backlog->catch_up_room > 0
                                   : room(backlog) >= room_at_most(backlog) / ROOM_PART;
}

/* Then nobody waits for what will not come, or not soon. */
static bool is_nobody_learning(const struct backlog *backlog)
{
    return backlog->trainer_failed || backlog->trainer_waits;
}

uint64_t backlog_wait_for_room(struct backlog *backlog)
{
    heartbeat_rest(&backlog->heartbeat, HEART_WRITER);
    sync_lock(&backlog->mutex);
    while (!has_room(backlog) && !backlog->stopping && !is_nobody_learning(backlog)) {
        (void)pthread_cond_wait(&backlog->learned_more, &backlog->mutex);
    }
    uint64_t cost = is_nobody_learning(backlog) ? UINT64_MAX : room(backlog);
    sync_unlock(&backlog->mutex);
    heartbeat_work(&backlog->heartbeat, HEART_WRITER);
    return cost > 0 ? cost : 1;
}

/* A full ring gives the newest mark the new seq, and leaves it its earlier time. */
static void add_mark(struct backlog *backlog, struct mark mark)
{
    if (backlog->mark_count == MARKS) {
        size_t last = (backlog->first_mark + MARKS - 1) % MARKS;
        backlog->marks[last].seq = mark.seq;
        return;
    }
    backlog->marks[(backlog->first_mark + backlog->mark_count) % MARKS] = mark;
    backlog->mark_count++;
}

void backlog_committed(struct backlog *backlog, uint64_t seq, uint64_t cost, uint64_t now_ms)
{
    heartbeat_work(&backlog->heartbeat, HEART_WRITER);
    sync_lock(&backlog->mutex);
    if (is_catching_up(backlog)) {
        backlog->found = seq;
        backlog->catch_up_room -= cost < backlog->catch_up_room ? cost : backlog->catch_up_room;
    } else {
        backlog->cost_behind += cost;
        add_mark(backlog, (struct mark){.seq = seq, .at_ms = now_ms});
    }
    backlog->numbers.committed = seq;
    (void)pthread_cond_signal(&backlog->committed_more);
    sync_unlock(&backlog->mutex);
}

/* --- trainer ------------------------------------------------------------------------------------
 */

void backlog_pause(struct backlog *backlog, uint64_t time_ms)
{
    struct timespec deadline = sync_deadline(time_ms);
    heartbeat_rest(&backlog->heartbeat, HEART_TRAINER);
    sync_lock(&backlog->mutex);
    int code = 0;
    while (!backlog->stopping && code == 0) {
        code = pthread_cond_timedwait(&backlog->committed_more, &backlog->mutex, &deadline);
    }
    sync_unlock(&backlog->mutex);
    heartbeat_work(&backlog->heartbeat, HEART_TRAINER);
}

uint64_t backlog_wait_for_work(struct backlog *backlog, uint64_t learned, uint64_t timeout_ms)
{
    struct timespec deadline = sync_deadline(timeout_ms);
    heartbeat_rest(&backlog->heartbeat, HEART_TRAINER);
    sync_lock(&backlog->mutex);
    int code = 0;
    while (backlog->numbers.committed <= learned && !backlog->stopping && !backlog->nudged &&
           code == 0) {
        code = pthread_cond_timedwait(&backlog->committed_more, &backlog->mutex, &deadline);
    }
    backlog->nudged = false;
    uint64_t committed = backlog->numbers.committed;
    sync_unlock(&backlog->mutex);
    heartbeat_work(&backlog->heartbeat, HEART_TRAINER);
    return committed;
}

void backlog_learned(struct backlog *backlog, uint64_t seq, uint64_t cost, uint64_t took_us)
{
    heartbeat_work(&backlog->heartbeat, HEART_TRAINER);
    sync_lock(&backlog->mutex);
    bool was_promised = seq > backlog->found;
    backlog->numbers.learned = seq;
    if (!was_promised) {
        backlog->catch_up_room += (uint64_t)((double)cost * CATCH_UP_SHARE);
    } else {
        backlog->cost_behind -= cost < backlog->cost_behind ? cost : backlog->cost_behind;
    }
    if (took_us > 0) {
        double weight = RATE_FOLLOWS * (double)took_us / 1e6;
        weight = weight < 1.0 ? weight : 1.0;
        backlog->rate += weight * ((double)cost * 1e6 / (double)took_us - backlog->rate);
    }
    if (seq >= backlog->numbers.committed) {
        backlog->cost_behind = 0;
    }
    while (backlog->mark_count > 0 && backlog->marks[backlog->first_mark].seq <= seq) {
        backlog->first_mark = (backlog->first_mark + 1) % MARKS;
        backlog->mark_count--;
    }
    (void)pthread_cond_broadcast(&backlog->learned_more);
    sync_unlock(&backlog->mutex);
}

void backlog_kept(struct backlog *backlog, uint64_t seq)
{
    sync_lock(&backlog->mutex);
    backlog->numbers.kept = seq;
    sync_unlock(&backlog->mutex);
}

void backlog_hold(struct backlog *backlog, enum backlog_holder holder, uint64_t seq)
{
    sync_lock(&backlog->mutex);
    backlog->held[holder] = seq;
    sync_unlock(&backlog->mutex);
}

uint64_t backlog_hold_committed(struct backlog *backlog, enum backlog_holder holder)
{
    sync_lock(&backlog->mutex);
    uint64_t committed = backlog->numbers.committed;
    backlog->held[holder] = committed;
    sync_unlock(&backlog->mutex);
    return committed;
}

void backlog_hold_kept(struct backlog *backlog, enum backlog_holder holder)
{
    sync_lock(&backlog->mutex);
    backlog->held[holder] = backlog->numbers.kept;
    sync_unlock(&backlog->mutex);
}

bool backlog_is_held(struct backlog *backlog, enum backlog_holder holder)
{
    sync_lock(&backlog->mutex);
    bool is_held = backlog->held[holder] != UINT64_MAX;
    sync_unlock(&backlog->mutex);
    return is_held;
}

void backlog_nudge(struct backlog *backlog)
{
    sync_lock(&backlog->mutex);
    backlog->nudged = true;
    (void)pthread_cond_broadcast(&backlog->committed_more);
    sync_unlock(&backlog->mutex);
}

void backlog_trainer_failed(struct backlog *backlog)
{
    sync_lock(&backlog->mutex);
    backlog->trainer_failed = true;
    (void)pthread_cond_broadcast(&backlog->learned_more);
    sync_unlock(&backlog->mutex);
}

void backlog_trainer_waits(struct backlog *backlog, bool waits)
{
    sync_lock(&backlog->mutex);
    backlog->trainer_waits = waits;
    (void)pthread_cond_broadcast(&backlog->learned_more);
    sync_unlock(&backlog->mutex);
}

/* --- whoever asks -------------------------------------------------------------------------------
 */

/* The newest seq that was committed visible_within_ms ago and is not learned yet; 0: none. */
static uint64_t seq_due(const struct backlog *backlog, uint64_t now_ms)
{
    uint64_t due = 0;
    for (size_t i = 0; i < backlog->mark_count; i++) {
        const struct mark *mark = &backlog->marks[(backlog->first_mark + i) % MARKS];
        if (mark->at_ms + backlog->visible_within_ms > now_ms) {
            break;
        }
        due = mark->seq;
    }
    return due;
}

void backlog_wait_for_promise(struct backlog *backlog, uint64_t now_ms)
{
    sync_lock(&backlog->mutex);
    uint64_t due = is_catching_up(backlog) ? 0 : seq_due(backlog, now_ms);
    while (backlog->numbers.learned < due && !backlog->stopping && !is_nobody_learning(backlog)) {
        (void)pthread_cond_wait(&backlog->learned_more, &backlog->mutex);
    }
    sync_unlock(&backlog->mutex);
}

struct backlog_numbers backlog_read(struct backlog *backlog)
{
    sync_lock(&backlog->mutex);
    struct backlog_numbers numbers = backlog->numbers;
    for (int i = 0; i < BACKLOG_HOLDERS; i++) {
        numbers.kept = numbers.kept < backlog->held[i] ? numbers.kept : backlog->held[i];
    }
    sync_unlock(&backlog->mutex);
    return numbers;
}

struct heartbeat *backlog_heartbeat(struct backlog *backlog)
{
    return &backlog->heartbeat;
}

void backlog_stop(struct backlog *backlog)
{
    sync_lock(&backlog->mutex);
    backlog->stopping = true;
    (void)pthread_cond_broadcast(&backlog->committed_more);
    (void)pthread_cond_broadcast(&backlog->learned_more);
    sync_unlock(&backlog->mutex);
}

bool backlog_is_stopping(struct backlog *backlog)
{
    sync_lock(&backlog->mutex);
    bool stopping = backlog->stopping;
    sync_unlock(&backlog->mutex);
    return stopping;
}
