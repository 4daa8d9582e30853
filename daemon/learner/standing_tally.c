#include "daemon/learner/standing_tally.h"

#include <errno.h>
#include <math.h>
#include <string.h>

#include "daemon/learner/sign_test.h"

/* Of the normal distribution, the quantile at .95: 90 % lie within. */
static const double INTERVAL_Z = 1.6448536269514722;

/* The same hits in another order may add up to a last bit more: that is no win. */
static const double ROUNDING = 1e-12;

static void add_item(struct tally_sums *sums, double amount, double basis)
{
    sums->a += amount;
    sums->b += basis;
    sums->aa += amount * amount;
    sums->bb += basis * basis;
    sums->ab += amount * basis;
}

static void add_pair(struct tally_pair *pair, double basis, double with, double without)
{
    add_item(&pair->without, without, basis);
    pair->a += with;
    pair->aa += with * with;
    pair->cross += with * without;
    double margin = ROUNDING * (with + without);
    pair->wins += with > without + margin ? 1.0 : 0.0;
    pair->losses += without > with + margin ? 1.0 : 0.0;
}

void tally_item(struct tally *tally, const struct ranking_amounts *bases,
                const struct ranking_amounts *with, const struct ranking_amounts *without)
{
    tally->items += 1.0;
    for (size_t i = 0; i < RANKING_FIGURES; i++) {
        add_item(&tally->with[i], with->of[i], bases->of[i]);
    }
    if (!without) {
        return;
    }
    tally->paired += 1.0;
    for (size_t i = 0; i < RANKING_FIGURES; i++) {
        add_pair(&tally->pairs[i], bases->of[i], with->of[i], without->of[i]);
    }
}

static void add_sums(struct tally_sums *sums, const struct tally_sums *other)
{
    sums->a += other->a;
    sums->b += other->b;
    sums->aa += other->aa;
    sums->bb += other->bb;
    sums->ab += other->ab;
}

static void add_pairs(struct tally_pair *pair, const struct tally_pair *other)
{
    add_sums(&pair->without, &other->without);
    pair->a += other->a;
    pair->aa += other->aa;
    pair->cross += other->cross;
    pair->wins += other->wins;
    pair->losses += other->losses;
}

void tally_add(struct tally *tally, const struct tally *other)
{
    tally->items += other->items;
    tally->paired += other->paired;
    for (size_t i = 0; i < RANKING_FIGURES; i++) {
        add_sums(&tally->with[i], &other->with[i]);
        add_pairs(&tally->pairs[i], &other->pairs[i]);
    }
}

/* The standard error of the ratio Σa/Σb over `items` items; Σ(a - ratio·b)² from the plain sums,
 * which rounding may leave below 0. */
static double ratio_error(const struct tally_sums *sums, double ratio, double items)
{
    if (items < 2.0) {
        return (double)NAN;
    }
    double squares = sums->aa - 2.0 * ratio * sums->ab + ratio * ratio * sums->bb;
    return sqrt(fmax(squares, 0.0) * items / (items - 1.0)) / sums->b;
}

static struct standing_figure figure_of(const struct tally_sums *sums, double items)
{
    if (!(sums->b > 0.0)) {
        return (struct standing_figure){(double)NAN, (double)NAN};
    }
    double value = sums->a / sums->b;
    return (struct standing_figure){value, ratio_error(sums, value, items)};
}

struct standing_figure tally_with(const struct tally *tally, enum ranking_figure figure)
{
    return figure_of(&tally->with[figure], tally->items);
}

struct standing_figure tally_without(const struct tally *tally, enum ranking_figure figure)
{
    return figure_of(&tally->pairs[figure].without, tally->paired);
}

/* The bases cancel: the learner's amounts over the shadow's are a ratio of sums themselves. */
static struct standing_figure pair_ratio(const struct tally_pair *pair, double paired)
{
    struct tally_sums sums = {
        .a = pair->a,
        .b = pair->without.a,
        .aa = pair->aa,
        .bb = pair->without.aa,
        .ab = pair->cross,
    };
    return figure_of(&sums, paired);
}

struct standing_gain tally_gain(const struct tally *tally, enum ranking_figure figure)
{
    const struct tally_pair *pair = &tally->pairs[figure];
    struct standing_figure ratio = pair_ratio(pair, tally->paired);
    double reach = INTERVAL_Z * ratio.error;
    struct standing_gain gain = {
        .value = ratio.value - 1.0,
        .low = ratio.value - reach - 1.0,
        .high = ratio.value + reach - 1.0,
        .wins = (uint64_t)pair->wins,
        .losses = (uint64_t)pair->losses,
        .p = (double)NAN,
    };
    if (tally->paired > 0.0) {
        gain.p = sign_test(gain.wins, gain.losses);
    }
    return gain;
}

/* --- storing ------------------------------------------------------------------------------------
 */

enum {
    EMPTY_VALUES = 1, /* items, which is 0 */
    WITH_VALUES = (int)(offsetof(struct tally, pairs) / sizeof(double)),
    ALL_VALUES = (int)(sizeof(struct tally) / sizeof(double))
};

_Static_assert(ALL_VALUES == 2 + 15 * RANKING_FIGURES, "a tally is doubles only");
_Static_assert(sizeof(struct tally) <= STANDING_PART_VALUES * sizeof(double),
               "a tally is one part");

static size_t value_count(double items, double paired)
{
    if (paired > 0.0) {
        return ALL_VALUES;
    }
    return items > 0.0 ? WITH_VALUES : EMPTY_VALUES;
}

size_t tally_values(const struct tally *tally, double ret_values[STANDING_PART_VALUES])
{
    size_t count = value_count(tally->items, tally->paired);
    memcpy(ret_values, tally, count * sizeof *ret_values);
    return count;
}

int tally_restore(struct tally *tally, const double *values, size_t count)
{
    if (count == 0 || count > ALL_VALUES) {
        return -EINVAL;
    }
    for (size_t i = 0; i < count; i++) {
        if (!(isfinite(values[i]) && values[i] >= 0.0)) {
            return -EINVAL;
        }
    }
    struct tally restored = {0};
    memcpy(&restored, values, count * sizeof *values);
    if (count != value_count(restored.items, restored.paired) || restored.paired > restored.items) {
        return -EINVAL;
    }
    *tally = restored;
    return 0;
}
