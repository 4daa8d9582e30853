/*
 * Shrinkage: the ridge of the batch objective, ½‖w‖² beside C times the losses, taken in as items
 * are rehearsed. A proximal step in AdaGrad's metric (Duchi, Hazan & Singer 2011, composite
 * updates) takes w to w / (1 + r/C), r = η/√(.1 + G) being the weight's own rate.
 *
 * Taken for all weights at once it would undo for a while what rare words have learned, and would
 * need a sweep over all words. So it is shared out over the items that hold the word, a part to
 * each, as each of them comes by (Recht, Ré, Wright & Niu 2011, equation 2): after a pass over
 * all items each weight has shrunk once, and no position is to be kept.
 */
#include <errno.h>
#include <math.h>

#include "daemon/learner/cell.h"
#include "daemon/learner/weights.h"
#include "daemon/learner/weights_private.h"

/*
 * A word of more items shrinks by that part at some of them, drawn by chance: all its postings are
 * walked and will be stored. Measured on D, P@1, P@5, PSP@5 and R@10 differ by .001 at most from
 * those of equal shares, the tail by .005, which is noise.
 */
static const double MOST_PARTS = 8.0;

/* Noise of its own, beside what learning draws of the same example. */
enum {
    WORD_NOISE = UINT32_MAX,
    CELL_NOISE_TURNED = 0x55555555
};

/* The part of a whole shrinkage that this item brings; 0 for none. */
static double part_of(const struct weights_shrinkage *shrinkage,
                      const struct weights_feature *feature)
{
    double holders = fmax((double)feature->document_count, 1.0);
    if (holders <= MOST_PARTS) {
        return 1.0 / holders;
    }
    uint64_t noise = cell_noise(shrinkage->number, feature->word, WORD_NOISE);
    double chance = (double)(noise >> 11U) * 0x1p-53;
    return chance * holders < MOST_PARTS ? 1.0 / MOST_PARTS : 0.0;
}

/* By part·r/C; the rounding is by chance, so that many small parts add up to the whole. */
static uint32_t shrink_cell(uint32_t cell, double strength, uint64_t noise)
{
    if (cell_weight(cell) == 0) {
        return cell;
    }
    float weight = (float)cell_weight(cell) * CELL_STEP;
    float excess = (float)strength / sqrtf(cell_accumulator(cell));
    int16_t moved = cell_move_weight(cell_weight(cell), -weight * excess / (1.0F + excess), noise);
    return cell_of(moved, cell_accumulator_code(cell));
}

static void shrink_chunk(const struct weights *weights, const struct chunk *chunk, double strength,
                         uint64_t number)
{
    size_t stride = postings_stride(weights->postings);
    for (size_t j = 0; j < chunk->count; j++) {
        uint32_t *posting = chunk->numbers + j * stride;
        for (size_t lane = 0; lane + 1 < stride; lane++) {
            uint64_t noise = cell_noise(number * WEIGHTS_LANES + lane, chunk->word,
                                        posting[0] ^ (uint32_t)CELL_NOISE_TURNED);
            posting[1 + lane] = shrink_cell(posting[1 + lane], strength, noise);
        }
    }
}

int weights_shrink(struct weights *weights, const struct weights_shrinkage *shrinkage)
{
    for (size_t i = 0; i < shrinkage->count; i++) {
        const struct weights_feature *feature = &shrinkage->x[i];
        double strength = part_of(shrinkage, feature) * shrinkage->step / shrinkage->cost;
        const uint32_t *places = NULL;
        uint32_t chunks =
            strength > 0.0 ? postings_chunks(weights->postings, feature->word, &places) : 0;
        for (uint32_t number = 0; number < chunks; number++) {
            uint32_t place = places[number] - 1;
            if (postings_touch(weights->postings, place) < 0) {
                return -ENOMEM;
            }
            shrink_chunk(weights, postings_at(weights->postings, place), strength,
                         shrinkage->number);
        }
    }
    return 0;
}
