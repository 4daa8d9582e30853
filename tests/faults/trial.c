#include "tests/faults/trial.h"

#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>

#include <cmocka.h>
#include <signal.h>
#include <stdio.h>
#include <string.h>

#include "tests/faults/exports.h"
#include "tests/faults/readback.h"
#include "tests/integration/answers.h"
#include "tests/integration/program.h"
#include "tests/integration/weights_checksum.h"

void trial_init(struct trial *trial, uint64_t seed)
{
    *trial = (struct trial){0};
    ledger_init(&trial->ledger, seed);
    undertagd_make(&trial->daemon);
    undertagd_make(&trial->undisturbed);
}

int trial_remove(struct trial *trial)
{
    int result = undertagd_remove(&trial->daemon);
    int other = undertagd_remove(&trial->undisturbed);
    ledger_deinit(&trial->ledger);
    return result < 0 ? result : other;
}

/* --- a round --------------------------------------------------------------------------------- */

void trial_start(struct trial *trial, unsigned round)
{
    undertagd_start(&trial->daemon);
    trial->storer = moments_find_storer(trial->daemon.child.pid);
    feeder_open(&trial->feeder, &trial->ledger, trial->daemon.socket, round);
}

/* A part of 2 that differs from rebuild to rebuild: in it every word has other weights. */
static double title_weight_of(unsigned rebuild)
{
    enum {
        DIFFERENT = 7
    };
    return rebuild == 0 ? 1.5 : 2.0 + 0.25 * (rebuild % DIFFERENT);
}

static void assert_title_weight(const json_t *settings, unsigned rebuild)
{
    double weight = number(settings, "title_weight");
    double wanted = title_weight_of(rebuild);
    if (weight < wanted || weight > wanted) { /* eighths have no rounding */
        fail_msg("title_weight is %g and not %g, as rebuild %u has it", weight, wanted, rebuild);
    }
}

/* The last rebuild that was acknowledged has come to its end, or is gone on with. */
static void assert_rebuild(struct trial *trial)
{
    const json_t *state = ask(&trial->feeder.peer, "daemon.state", "{}");
    const json_t *rebuild = json_object_get(state, "rebuild");
    if (json_is_null(rebuild)) {
        assert_title_weight(json_object_get(state, "settings"), trial->rebuild.number);
    } else {
        assert_int_equal(whole(rebuild, "seq"), trial->rebuild.moment);
        assert_title_weight(json_object_get(rebuild, "settings"), trial->rebuild.number);
    }
    assert_int_equal(json_array_size(json_object_get(state, "faults")), 0);
}

void trial_settle(struct trial *trial)
{
    struct ledger *ledger = &trial->ledger;
    unsigned acknowledged = ledger->acknowledged.seq;
    unsigned sent = ledger->sent.seq;
    unsigned seq = (unsigned)ask_seq(&trial->feeder.peer);
    ledger_settle(ledger, seq);
    trial->counts.found_in += seq - acknowledged;
    trial->counts.lost += sent - seq;
    readback_assert(ledger, &trial->feeder.peer);
    assert_rebuild(trial);
    assert_false(moments_is_writing_snapshot(trial->daemon.home)); /* what was left is gone */
    trial->counts.snapshots += exports_assert_whole(trial->daemon.home);
    trial->counts.read_back++;
}

static unsigned ask_rebuild(struct peer *peer, unsigned number)
{
    return peer_request(peer, "daemon.rebuild", "{'settings': {'title_weight': %.2f}}",
                        title_weight_of(number));
}

void trial_rebuild(struct trial *trial)
{
    struct peer *peer = &trial->feeder.peer;
    struct trial_rebuild *rebuild = &trial->rebuild;
    feeder_drain(&trial->feeder);
    unsigned id = ask_rebuild(peer, rebuild->number + 1);
    const json_t *answer = peer_answer(peer);
    const json_t *result = json_object_get(answer, "result");
    assert_int_equal(whole(answer, "id"), id);
    if (!result) { /* one is under way */
        assert_error(json_object_get(answer, "error"), -32005, "");
        return;
    }
    rebuild->number++;
    rebuild->moment = trial->ledger.acknowledged.seq;
    assert_int_equal(whole(result, "seq"), rebuild->moment);
}

void trial_snapshot(const struct trial *trial)
{
    assert_int_equal(kill(trial->daemon.child.pid, SIGUSR1), 0);
}

bool trial_is_opening(const struct trial *trial)
{
    return trial->ledger.sent.tags > trial->ledger.acknowledged.tags;
}

static void count(struct trial_counts *counts, const struct moment *moment)
{
    counts->kills++;
    counts->in_flush += moment->in_flush ? 1 : 0;
    counts->in_build += moment->in_build ? 1 : 0;
    counts->in_storing_build += moment->in_storing_build ? 1 : 0;
    counts->in_commit += moment->in_commit ? 1 : 0;
    counts->in_overwriting += moment->in_overwriting ? 1 : 0;
    counts->in_snapshot += moment->in_snapshot ? 1 : 0;
    bool is_somewhere = moment->in_flush || moment->in_build || moment->in_commit ||
                        moment->in_overwriting || moment->in_snapshot;
    counts->elsewhere += is_somewhere ? 0 : 1;
}

struct moment trial_kill(struct trial *trial)
{
    undertagd_kill(&trial->daemon);
    struct moment moment = moments_of_kill(trial->daemon.home, trial->storer);
    feeder_close_after_kill(&trial->feeder);
    trial->counts.opening += trial_is_opening(trial) ? 1 : 0;
    count(&trial->counts, &moment);
    return moment;
}

void trial_verify(struct trial *trial)
{
    struct program_run run;
    const char *const arguments[] = {"--verify", "--home", trial->daemon.home, NULL};
    program_run("undertagd", arguments, "", &run);
    if (run.exit_code != 0 || !strstr(run.output, "store: whole: ")) {
        fail_msg("the home is not whole (%d): %s%s", run.exit_code, run.output, run.error);
    }
    trial->counts.verified++;
}

/* --- the weights ----------------------------------------------------------------------------- */

static uint64_t stop_and_sum(struct undertagd *daemon, struct peer *peer)
{
    wait_until_rebuilt(peer);
    wait_until_learned(peer);
    peer_close(peer);
    assert_int_equal(undertagd_stop(daemon), 0);
    return weights_checksum(daemon->home);
}

static void repeat_up_to(struct trial *trial, struct peer *peer, unsigned last)
{
    feeder_repeat(&trial->ledger, peer, trial->repeated, last);
    trial->repeated = last;
}

/* The last rebuild at its moment, without those before it: each item is learned anew in it. */
static void repeat_rebuild(struct trial *trial, struct peer *peer)
{
    repeat_up_to(trial, peer, trial->rebuild.moment);
    unsigned id = ask_rebuild(peer, trial->rebuild.number);
    assert_int_equal(whole(peer_result(peer, id), "seq"), trial->rebuild.moment);
    wait_until_rebuilt(peer);
    trial->rebuilt = trial->rebuild.number;
}

/* The checksum of the daemon that nothing happens to, with the same changes. */
static uint64_t sum_undisturbed(struct trial *trial)
{
    struct peer peer;
    undertagd_start(&trial->undisturbed);
    peer_open(&peer, trial->undisturbed.socket);
    if (trial->rebuilt != trial->rebuild.number) {
        repeat_rebuild(trial, &peer);
    }
    repeat_up_to(trial, &peer, trial->ledger.acknowledged.seq);
    return stop_and_sum(&trial->undisturbed, &peer);
}

void trial_compare_weights(struct trial *trial)
{
    uint64_t sum = stop_and_sum(&trial->daemon, &trial->feeder.peer);
    trial_verify(trial);
    if (sum != sum_undisturbed(trial)) {
        fail_msg("after change %u the weights are not those of an undisturbed run (rebuild %u, of "
                 "change %u)",
                 trial->ledger.acknowledged.seq, trial->rebuild.number, trial->rebuild.moment);
    }
    trial->counts.weights_compared++;
}
