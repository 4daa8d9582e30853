/*
 * An item adds to the open block and to nothing else. When the block is full it is added to the
 * open segment; when all segments are full, neighbours are merged. A window adds up the newest
 * blocks, all time the segments and the open block. Nothing here can fail but standing_new.
 */
#include "daemon/learner/standing.h"

#include <errno.h>
#include <stdlib.h>
#include <string.h>

#include "daemon/learner/standing_private.h"

static const char *const band_names[STANDING_BANDS] = {"all", "head", "torso", "tail"};

int standing_new(struct standing **ret_standing)
{
    struct standing *standing = calloc(1, sizeof *standing);
    if (!standing) {
        return -ENOMEM;
    }
    *ret_standing = standing;
    return 0;
}

void standing_free(struct standing *standing)
{
    free(standing);
}

uint64_t standing_bytes(const struct standing *standing)
{
    return sizeof *standing;
}

const char *standing_band_name(enum standing_band band)
{
    return band_names[band];
}

enum standing_band standing_band_of(double tag_count)
{
    if (tag_count >= standing_band_from(STANDING_HEAD)) {
        return STANDING_HEAD;
    }
    return tag_count >= standing_band_from(STANDING_TORSO) ? STANDING_TORSO : STANDING_TAIL;
}

double standing_band_from(enum standing_band band)
{
    static const double FROM[STANDING_BANDS] = {[STANDING_HEAD] = 1000.0, [STANDING_TORSO] = 30.0};
    return FROM[band];
}

/* --- where things are ---------------------------------------------------------------------------
 */

static uint64_t closed_blocks(const struct standing *standing)
{
    return standing->items / STANDING_BLOCK_ITEMS;
}

static uint64_t open_items(const struct standing *standing)
{
    return standing->items % STANDING_BLOCK_ITEMS;
}

static size_t block_cell(uint64_t block)
{
    return (size_t)(block % STANDING_BLOCKS);
}

static size_t segment_cell(uint64_t segment)
{
    return STANDING_BLOCKS + (size_t)segment;
}

/* Doubled as often as the segments have been full. */
static uint64_t blocks_per_segment(uint64_t closed)
{
    uint64_t length = 1;
    while (closed >= length * STANDING_SEGMENTS) {
        length *= 2;
    }
    return length;
}

/* The segment that the open block belongs to; those before it are full, those behind it empty. */
static uint64_t open_segment(const struct standing *standing)
{
    uint64_t closed = closed_blocks(standing);
    return closed / blocks_per_segment(closed);
}

static void mark_cell(struct standing *standing, size_t cell)
{
    memset(&standing->changed[standing_cell_part(cell, 0)], 1, STANDING_BANDS);
}

/* --- adding -------------------------------------------------------------------------------------
 */

static void clear_cell(struct standing *standing, size_t cell)
{
    memset(standing->cells[cell], 0, sizeof standing->cells[cell]);
    mark_cell(standing, cell);
}

static void add_cell(struct standing *standing, size_t cell, size_t other)
{
    for (size_t band = 0; band < STANDING_BANDS; band++) {
        if (standing->cells[other][band].items > 0.0) {
            tally_add(&standing->cells[cell][band], &standing->cells[other][band]);
            standing->changed[standing_cell_part(cell, band)] = 1;
        }
    }
}

static void merge_segments(struct standing *standing)
{
    for (size_t i = 0; i < STANDING_SEGMENTS / 2; i++) {
        size_t cell = segment_cell(i);
        size_t left = segment_cell(2 * i);
        if (cell != left) {
            memcpy(standing->cells[cell], standing->cells[left], sizeof standing->cells[cell]);
        }
        add_cell(standing, cell, left + 1);
        mark_cell(standing, cell);
    }
    for (size_t i = STANDING_SEGMENTS / 2; i < STANDING_SEGMENTS; i++) {
        clear_cell(standing, segment_cell(i));
    }
}

/* `block` has just had its last item. */
static void close_block(struct standing *standing, uint64_t block)
{
    uint64_t length = blocks_per_segment(block);
    add_cell(standing, segment_cell(block / length), block_cell(block));
    if (block + 1 == length * STANDING_SEGMENTS) {
        merge_segments(standing);
    }
}

static void add_in_band(struct tally *tally, const struct ranking_truth *truth,
                        const struct ranking_list *with, const struct ranking_list *without)
{
    struct ranking_amounts bases;
    struct ranking_amounts amounts;
    struct ranking_amounts shadow;
    ranking_bases(truth, &bases);
    ranking_amounts(truth, with, &amounts);
    if (without) {
        ranking_amounts(truth, without, &shadow);
    }
    tally_item(tally, &bases, &amounts, without ? &shadow : NULL);
}

void standing_add(struct standing *standing, const struct ranking_truth truths[STANDING_BANDS],
                  const struct ranking_list with[STANDING_BANDS],
                  const struct ranking_list *without)
{
    uint64_t block = closed_blocks(standing);
    size_t cell = block_cell(block);
    if (open_items(standing) == 0) {
        clear_cell(standing, cell);
    }
    for (size_t band = 0; band < STANDING_BANDS; band++) {
        if (truths[band].count > 0) {
            add_in_band(&standing->cells[cell][band], &truths[band], &with[band],
                        without ? &without[band] : NULL);
            standing->changed[standing_cell_part(cell, band)] = 1;
        }
    }
    standing->items++;
    standing->changed[STANDING_META_PART] = 1;
    if (open_items(standing) == 0) {
        close_block(standing, block);
    }
}

void standing_ruled(struct standing *standing, double chance, bool confirmed)
{
    reliability_add(&standing->reliability, chance, confirmed);
    standing->changed[STANDING_META_PART] = 1;
}

/* --- asking -------------------------------------------------------------------------------------
 */

uint64_t standing_items(const struct standing *standing)
{
    return standing->items;
}

/* Tallies by band, and the items that they cover. */
struct total {
    uint64_t items;
    struct tally bands[STANDING_BANDS];
};

static void total_add(struct total *total, const struct tally cell[STANDING_BANDS], uint64_t items)
{
    total->items += items;
    for (size_t band = 0; band < STANDING_BANDS; band++) {
        tally_add(&total->bands[band], &cell[band]);
    }
}

static void total_add_open(struct total *total, const struct standing *standing)
{
    if (open_items(standing) > 0) {
        total_add(total, standing->cells[block_cell(closed_blocks(standing))],
                  open_items(standing));
    }
}

static void total_of_all(const struct standing *standing, struct total *total)
{
    for (uint64_t i = 0; i <= open_segment(standing); i++) {
        total_add(total, standing->cells[segment_cell(i)], 0);
    }
    total_add_open(total, standing);
    total->items = standing->items;
}

static void total_of_window(const struct standing *standing, uint64_t window, struct total *total)
{
    uint64_t closed = closed_blocks(standing);
    uint64_t kept = STANDING_BLOCKS - (open_items(standing) > 0 ? 1 : 0);
    uint64_t oldest = closed > kept ? closed - kept : 0;
    total_add_open(total, standing);
    for (uint64_t block = closed; block > oldest && total->items < window; block--) {
        total_add(total, standing->cells[block_cell(block - 1)], STANDING_BLOCK_ITEMS);
    }
}

static void answer_band(const struct tally *tally, struct standing_in_band *ret_band)
{
    ret_band->items = (uint64_t)tally->items;
    ret_band->paired = (uint64_t)tally->paired;
    for (unsigned i = 0; i < RANKING_FIGURES; i++) {
        ret_band->with[i] = tally_with(tally, i);
        ret_band->without[i] = tally_without(tally, i);
        ret_band->gain[i] = tally_gain(tally, i);
    }
}

void standing_ask(const struct standing *standing, uint64_t window,
                  struct standing_answer *ret_answer)
{
    struct total total = {0};
    if (window == 0) {
        total_of_all(standing, &total);
    } else {
        total_of_window(standing, window, &total);
    }
    ret_answer->items = total.items;
    for (size_t band = 0; band < STANDING_BANDS; band++) {
        answer_band(&total.bands[band], &ret_answer->bands[band]);
    }
}

static void point_of(const struct tally *tally, uint64_t items, struct standing_point *ret_point)
{
    ret_point->items = items;
    for (unsigned i = 0; i < RANKING_FIGURES; i++) {
        ret_point->with[i] = tally_with(tally, i).value;
        ret_point->without[i] = tally_without(tally, i).value;
    }
}

size_t standing_history(const struct standing *standing,
                        struct standing_point ret_points[STANDING_SEGMENTS])
{
    uint64_t length = blocks_per_segment(closed_blocks(standing)) * STANDING_BLOCK_ITEMS;
    size_t count = 0;
    for (uint64_t from = 0; from < standing->items; from += length) {
        struct tally tally = standing->cells[segment_cell(count)][STANDING_ALL];
        uint64_t left = standing->items - from;
        if (count == open_segment(standing) && open_items(standing) > 0) {
            tally_add(&tally, &standing->cells[block_cell(closed_blocks(standing))][STANDING_ALL]);
        }
        point_of(&tally, left < length ? left : length, &ret_points[count]);
        count++;
    }
    return count;
}

void standing_reliability(const struct standing *standing,
                          struct reliability_row ret_rows[RELIABILITY_CLASSES])
{
    reliability_rows(&standing->reliability, ret_rows);
}
