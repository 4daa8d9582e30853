/*
 * kill -9 at random moments, round after round on one home: what was acknowledged must be there
 * after each, once, with the contents that were acknowledged; stored counts must be those of the
 * items; and the weights must be those of a daemon that nothing ever happened to.
 *
 * Arguments: the number of rounds (50) and a seed (1). Changes and delays are functions of the
 * seed; what the kernel makes of them is not, so that a seed repeats a failure only as far as that.
 * From two dozen rounds on everything that is aimed at is hit.
 */
#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>

#include <cmocka.h>
#include <errno.h>
#include <signal.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <sys/stat.h>
#include <sys/wait.h>
#include <unistd.h>

#include "daemon/clock.h"
#include "storage/kv.h"
#include "tests/faults/trial.h"
#include "tests/unit/repeatable.h"

enum {
    ROUNDS = 50,
    VERIFY_EVERY = 5, /* rounds */
    WEIGHTS_EVERY = 25,
    MOST_FED_US = 150000,
    MOST_WAIT_US = 3000000 /* for what is aimed at */
};

/* A delay that grows while kills hit what they are aimed at, and shrinks when they come too late:
 * so they are spread over all of it, however long it takes on this machine. */
struct spread {
    double most_us;
};

struct shooting {
    struct trial trial;
    unsigned rounds;
    unsigned round; /* the one at hand, from 1 */
    const char *aimed_at;
    struct repeatable random;
    unsigned budget; /* changes that are still to be fed in this round */
    struct spread flush;
    struct spread build;
    struct spread storing_build;
    struct spread snapshot;
    bool is_done; /* all rounds */
    bool has_failed;
};

static struct shooting shooting;
static uint64_t seed = 1;
static unsigned rounds = ROUNDS;

/* --- feeding while waiting for the moment ---------------------------------------------------- */

static void pump(struct shooting *at, bool at_once)
{
    unsigned sent = at->trial.ledger.sent.seq;
    feeder_pump(&at->trial.feeder, at->budget > 0, at_once);
    at->budget -= at->trial.ledger.sent.seq - sent;
}

static void pump_for(struct shooting *at, double most_us)
{
    uint64_t until_us = clock_steady_us() + (uint64_t)(repeatable_share(&at->random) * most_us);
    while (clock_steady_us() < until_us) {
        pump(at, false);
    }
}

/* Lets a part of the delay go by; nothing is sent in it, which would take longer. */
static void spin_for(struct shooting *at, const struct spread *spread)
{
    uint64_t until_us =
        clock_steady_us() + (uint64_t)(repeatable_share(&at->random) * spread->most_us);
    while (clock_steady_us() < until_us) {
    }
}

static void learn_from(struct spread *spread, bool is_hit)
{
    enum {
        LEAST_US = 20,
        MOST_US = 300000
    };
    spread->most_us *= is_hit ? 1.25 : 0.6;
    spread->most_us = spread->most_us < LEAST_US ? LEAST_US : spread->most_us;
    spread->most_us = spread->most_us > MOST_US ? MOST_US : spread->most_us;
}

/* Feeds on until it is so, or has not come for long. */
static void pump_until(struct shooting *at, bool (*is_so)(const struct trial *trial))
{
    const struct ledger *ledger = &at->trial.ledger;
    uint64_t until_us = clock_steady_us() + MOST_WAIT_US;
    while (!is_so(&at->trial) && clock_steady_us() < until_us) {
        pump(at, true);
        bool is_quiet = ledger->sent.seq == ledger->acknowledged.seq;
        at->budget += at->budget == 0 && is_quiet ? 1 : 0; /* or nothing more would be stored */
    }
}

static bool is_flushing(const struct trial *trial)
{
    return moments_is_flushing(trial->daemon.home, trial->storer);
}

static bool is_building(const struct trial *trial)
{
    return moments_is_building(trial->daemon.home);
}

static bool is_storing_build(const struct trial *trial)
{
    return moments_is_storing_build(trial->daemon.home);
}

static bool is_writing_snapshot(const struct trial *trial)
{
    return moments_is_writing_snapshot(trial->daemon.home);
}

static bool is_committing_a_tag(const struct trial *trial)
{
    return trial_is_opening(trial) && moments_is_committing(trial->daemon.home);
}

/* --- what is aimed at ------------------------------------------------------------------------ */

static void shoot_anywhere(struct shooting *at)
{
    pump_for(at, MOST_FED_US);
    if (repeatable_below(&at->random, 4) == 0) {
        trial_rebuild(&at->trial);
        pump_for(at, MOST_FED_US);
    }
    (void)trial_kill(&at->trial);
}

static void shoot_at_flush(struct shooting *at)
{
    pump_for(at, MOST_FED_US);
    pump_until(at, is_flushing);
    spin_for(at, &at->flush);
    learn_from(&at->flush, trial_kill(&at->trial).in_flush);
}

static void shoot_at_vocabulary(struct shooting *at)
{
    enum {
        MORE_CHANGES = 1000 /* until one of them opens a tag at the right moment */
    };
    pump_for(at, MOST_FED_US);
    at->budget += MORE_CHANGES;
    pump_until(at, is_committing_a_tag);
    (void)trial_kill(&at->trial);
}

static void shoot_at_build(struct shooting *at)
{
    pump_for(at, MOST_FED_US);
    trial_rebuild(&at->trial);
    pump_until(at, is_building);
    pump_for(at, at->build.most_us);
    learn_from(&at->build, trial_kill(&at->trial).in_build);
}

static void shoot_at_storing_build(struct shooting *at)
{
    pump_for(at, MOST_FED_US);
    trial_rebuild(&at->trial);
    pump_until(at, is_storing_build);
    spin_for(at, &at->storing_build);
    learn_from(&at->storing_build, trial_kill(&at->trial).in_storing_build);
}

static void shoot_at_snapshot(struct shooting *at)
{
    pump_for(at, MOST_FED_US);
    trial_snapshot(&at->trial);
    pump_until(at, is_writing_snapshot);
    pump_for(at, at->snapshot.most_us);
    learn_from(&at->snapshot, trial_kill(&at->trial).in_snapshot);
}

/* While it goes on from where it was killed: before anything is asked or fed. */
static void shoot_at_start(struct shooting *at)
{
    struct spread first = {.most_us = 30000};
    spin_for(at, &first);
    (void)trial_kill(&at->trial);
}

/*
 * Round after round, what is aimed at and the options that the daemon is started with. Whoever adds
 * something that writes adds here where to shoot at it, in moments.h how a kill that hit it is
 * known, and below a figure that may not be none.
 */
static const struct aim {
    const char *name;
    void (*shoot)(struct shooting *at);
    bool starts_only; /* nothing is asked before */
    const char *settings[2];
} AIMS[] = {
    {"anywhere", shoot_anywhere, false, {"flush_every_ms=10", "flush_changes=1"}},
    {"a flush", shoot_at_flush, false, {"flush_every_ms=10", "flush_changes=1"}},
    {"a build", shoot_at_build, false, {"flush_every_ms=10", "flush_changes=1"}},
    {"a start", shoot_at_start, true, {"flush_every_ms=10", "flush_changes=1"}},
    {"anywhere, with a backlog", shoot_anywhere, false, {"visible_within_ms=60000", NULL}},
    {"a flush, with a backlog",
     shoot_at_flush,
     false,
     {"visible_within_ms=60000", "flush_every_ms=10"}},
    {"a new tag", shoot_at_vocabulary, false, {NULL, NULL}},
    {"storing of a build", shoot_at_storing_build, false, {"flush_every_ms=10", "flush_changes=1"}},
    {"a snapshot", shoot_at_snapshot, false, {"snapshot_rate=1MiB", "snapshot_keep=2"}},
    {"a flush", shoot_at_flush, false, {"flush_every_ms=20", "memory_budget=64MiB"}},
    {"anywhere, with nothing stored", shoot_anywhere, false, {"flush_every_ms=3600000", NULL}},
    {"a snapshot, all at once", shoot_at_snapshot, false, {"snapshot_keep=1", "snapshot_items=on"}},
    {"a build, with nothing stored", shoot_at_build, false, {"flush_every_ms=3600000", NULL}},
    {"a start, with nothing stored", shoot_at_start, true, {"flush_every_ms=3600000", NULL}},
};

enum {
    AIM_COUNT = sizeof AIMS / sizeof AIMS[0]
};

/* --- rounds ---------------------------------------------------------------------------------- */

static void begin(struct shooting *at, const struct aim *aim)
{
    enum {
        LEAST_CHANGES = 20,
        MORE_CHANGES = 380
    };
    at->aimed_at = aim->name;
    at->random.state = seed + ((uint64_t)at->round << 32U);
    at->budget = LEAST_CHANGES + repeatable_below(&at->random, MORE_CHANGES);
    memcpy(at->trial.daemon.settings, aim->settings, sizeof aim->settings);
    trial_start(&at->trial, at->round);
}

static void run_round(struct shooting *at)
{
    const struct aim *aim = &AIMS[(at->round - 1) % AIM_COUNT];
    begin(at, aim);
    if (!aim->starts_only) {
        trial_settle(&at->trial);
    }
    aim->shoot(at);
    if (at->round % VERIFY_EVERY == 0) {
        trial_verify(&at->trial);
    }
}

static void compare_weights(struct shooting *at)
{
    at->aimed_at = "nothing, weights are compared";
    trial_start(&at->trial, at->round);
    trial_settle(&at->trial);
    trial_compare_weights(&at->trial);
}

static void every_acknowledged_change_is_there_once_after_each_kill(void **state)
{
    struct shooting *at = *state;
    for (at->round = 1; at->round <= at->rounds; at->round++) {
        run_round(at);
        if (at->round % WEIGHTS_EVERY == 0 && at->round < at->rounds) {
            compare_weights(at);
        }
    }
    at->is_done = true;
}

static void the_weights_are_those_of_an_undisturbed_run(void **state)
{
    struct shooting *at = *state;
    assert_true(at->is_done);
    compare_weights(at);
}

static void kills_fell_inside_flushes_builds_snapshots_and_commits(void **state)
{
    const struct shooting *at = *state;
    const struct trial_counts *counts = &at->trial.counts;
    assert_true(at->is_done);
    assert_int_equal(counts->kills, at->rounds);
    assert_true(counts->in_flush > 0);
    assert_true(counts->in_build > 0);
    assert_true(counts->in_storing_build > 0);
    assert_true(counts->in_commit > 0);
    assert_true(counts->in_snapshot > 0);
    assert_true(counts->opening > 0);
}

/* --- how a kill inside a transaction is known ------------------------------------------------ */

static void die_in(const char *folder, bool inside)
{
    static const char *const TABLES[] = {"entries"};
    char path[UNDERTAGD_PATH_BYTES];
    struct store_error error = {0};
    struct kv *kv = NULL;
    struct kv_txn *txn = NULL;
    (void)snprintf(path, sizeof path, "%s/env", folder);
    const struct kv_settings settings = {
        .directory = path, .map_bytes = 1U << 24U, .tables = TABLES, .table_count = 1};
    if ((mkdir(path, 0700) < 0 && errno != EEXIST) || kv_open(&settings, &kv, &error) != STORE_OK ||
        kv_begin(kv, true, &txn, &error) != STORE_OK) {
        _exit(1);
    }
    if (!inside) {
        kv_abort(txn);
    }
    (void)raise(SIGKILL);
    _exit(1);
}

static bool dies_inside(const char *folder, bool inside)
{
    int status = 0;
    pid_t child = fork();
    assert_true(child >= 0);
    if (child == 0) {
        die_in(folder, inside);
    }
    assert_int_equal(waitpid(child, &status, 0), child);
    assert_true(WIFSIGNALED(status) && WTERMSIG(status) == SIGKILL);
    return moments_was_left_open(folder, "env");
}

/* Or the counts of kills would be worth nothing. */
static void a_kill_inside_a_transaction_shows_in_the_lock_file(void **state)
{
    const struct shooting *at = *state;
    assert_false(dies_inside(at->trial.daemon.folder, false));
    assert_true(dies_inside(at->trial.daemon.folder, true));
    assert_false(dies_inside(at->trial.daemon.folder, false)); /* it is reset when it is opened */
}

/* --- report ---------------------------------------------------------------------------------- */

static void report(const struct shooting *at)
{
    const struct trial_counts *counts = &at->trial.counts;
    const struct ledger *ledger = &at->trial.ledger;
    print_message("%u rounds, seed %llu: %u changes acknowledged, each there once; %u in doubt "
                  "when the daemon was killed, of which %u were in and %u were not\n",
                  at->rounds, (unsigned long long)seed, ledger->acknowledged.seq - counts->found_in,
                  counts->found_in + counts->lost, counts->found_in, counts->lost);
    print_message(
        "kills: %u inside a flush, %u inside a build (%u while it was stored), %u inside "
        "a commit of changes, %u while overwriting, %u inside a snapshot, %u elsewhere; %u with a "
        "new tag under way\n",
        counts->in_flush, counts->in_build, counts->in_storing_build, counts->in_commit,
        counts->in_overwriting, counts->in_snapshot, counts->elsewhere, counts->opening);
    print_message("all items and tags read back %u times, found whole %u times, weights compared "
                  "%u times; %u rebuilds, %u tags; whole snapshots found %u times\n",
                  counts->read_back, counts->verified, counts->weights_compared,
                  at->trial.rebuild.number, ledger->acknowledged.tags, counts->snapshots);
}

/* After each test; the homes of one that failed are kept. */
static int look_whether_it_failed(void **state)
{
    struct shooting *at = *state;
    if (!at->is_done && at->round > 0) {
        at->has_failed = true;
        print_error("seed %llu, round %u of %u, aimed at %s; the homes stay in %s and %s\n",
                    (unsigned long long)seed, at->round, at->rounds, at->aimed_at,
                    at->trial.daemon.folder, at->trial.undisturbed.folder);
    }
    return 0;
}

static int set_up(void **state)
{
    shooting = (struct shooting){.rounds = rounds,
                                 .flush = {.most_us = 500},
                                 .build = {.most_us = 10000},
                                 .storing_build = {.most_us = 500},
                                 .snapshot = {.most_us = 200000}};
    trial_init(&shooting.trial, seed);
    *state = &shooting;
    return 0;
}

static int tear_down(void **state)
{
    struct shooting *at = *state;
    if (at->has_failed) {
        return -1; /* who looks into the homes wants them as they are */
    }
    report(at);
    return trial_remove(&at->trial);
}

#define TEST(name) cmocka_unit_test_teardown(name, look_whether_it_failed)

static bool read_number(const char *text, uint64_t *ret_number)
{
    char *end = NULL;
    *ret_number = strtoull(text, &end, 10);
    return end != text && *end == '\0' && *ret_number > 0;
}

int main(int argc, char **argv)
{
    uint64_t wanted = ROUNDS;
    if ((argc > 1 && !read_number(argv[1], &wanted)) ||
        (argc > 2 && !read_number(argv[2], &seed)) || argc > 3 || wanted > 1000000) {
        (void)fprintf(stderr, "%s [ROUNDS [SEED]]\n", argv[0]); /* nobody else to tell */
        return 64;
    }
    rounds = (unsigned)wanted;
    const struct CMUnitTest tests[] = {
        TEST(a_kill_inside_a_transaction_shows_in_the_lock_file),
        TEST(every_acknowledged_change_is_there_once_after_each_kill),
        TEST(the_weights_are_those_of_an_undisturbed_run),
        TEST(kills_fell_inside_flushes_builds_snapshots_and_commits),
    };
    return cmocka_run_group_tests_name("crash rounds", tests, set_up, tear_down);
}
