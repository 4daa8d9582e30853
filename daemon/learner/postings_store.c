/* What of the postings has changed, to be stored, and how memory lets go of what is stored. */
#include <assert.h>
#include <errno.h>
#include <stdlib.h>
#include <string.h>

#include "daemon/grow.h"
#include "daemon/learner/postings.h"
#include "daemon/learner/postings_private.h"

struct listed {
    uint64_t order;
    uint32_t place;
};

static int compare_listed(const void *left, const void *right)
{
    uint64_t a = ((const struct listed *)left)->order;
    uint64_t b = ((const struct listed *)right)->order;
    return (a > b) - (a < b);
}

static size_t list_places(const struct postings *postings, const uint32_t *places, size_t count,
                          struct listed *ret_list)
{
    size_t listed = 0;
    for (size_t i = 0; i < count; i++) {
        const struct chunk *chunk = &postings->chunks[places[i]];
        if (chunk->is_there && (chunk->is_changed || chunk->is_sealed)) {
            ret_list[listed++] =
                (struct listed){(uint64_t)chunk->word << 32U | chunk->number, places[i]};
        }
    }
    return listed;
}

/* Places by rising word and number, each once; those that are gone are left out. */
static size_t sort_places(const struct postings *postings, struct listed *list, uint32_t *places)
{
    size_t count = list_places(postings, postings->sealed, postings->sealed_count, list);
    count += list_places(postings, postings->changed, postings->changed_count, list + count);
    if (count > 1) {
        qsort(list, count, sizeof *list, compare_listed);
    }
    size_t kept = 0;
    for (size_t i = 0; i < count; i++) {
        if (i == 0 || list[i].place != list[i - 1].place) {
            places[kept++] = list[i].place;
        }
    }
    return kept;
}

int postings_changed(const struct postings *postings, uint32_t **ret_places, size_t *ret_count)
{
    size_t most = postings_changed_count(postings);
    struct listed *list = calloc(most + 1, sizeof *list);
    uint32_t *places = calloc(most + 1, sizeof *places);
    if (!list || !places) {
        free(list);
        free(places);
        return -ENOMEM;
    }
    *ret_count = sort_places(postings, list, places);
    *ret_places = places;
    free(list);
    return 0;
}

size_t postings_changed_count(const struct postings *postings)
{
    return postings->sealed_count + postings->changed_count;
}

const struct postings_cut *postings_cuts(const struct postings *postings, size_t *ret_count)
{
    *ret_count = postings->cut_count;
    return postings->cuts;
}

int postings_seal(struct postings *postings)
{
    if (GROW(&postings->sealed, &postings->sealed_capacity, postings_changed_count(postings)) < 0) {
        return -ENOMEM;
    }
    for (size_t i = 0; i < postings->changed_count; i++) {
        uint32_t place = postings->changed[i];
        struct chunk *chunk = &postings->chunks[place];
        if (chunk->is_there && chunk->is_changed && !chunk->is_sealed) {
            postings->sealed[postings->sealed_count++] = place;
            chunk->is_sealed = true;
        }
        chunk->is_changed = false;
    }
    postings->changed_count = 0;
    postings->sealed_cut_count = postings->cut_count;
    return 0;
}

/* A word without chunks was known only so that nobody looks for those that were cut off; while
 * some of them are stored yet, it stays so, and the cut with it. */
static void forget_cuts(struct postings *postings)
{
    size_t left = postings->cut_count - postings->sealed_cut_count;
    size_t kept = 0;
    for (size_t i = 0; i < postings->sealed_cut_count; i++) {
        const struct postings_cut cut = postings->cuts[i];
        const struct index_word *entry = index_find(&postings->index, cut.word);
        if (entry && entry->chunk_count == 0 && left > 0) {
            postings->cuts[kept++] = cut;
        } else if (entry && entry->chunk_count == 0) {
            index_remove(&postings->index, cut.word);
        }
    }
    memmove(postings->cuts + kept, postings->cuts + postings->sealed_cut_count,
            left * sizeof *postings->cuts);
    postings->cut_count = kept + left;
    postings->sealed_cut_count = 0;
}

void postings_stored(struct postings *postings)
{
    if (postings->sealed_cut_count > 0) {
        forget_cuts(postings);
    }
    for (size_t i = 0; i < postings->sealed_count; i++) {
        postings->chunks[postings->sealed[i]].is_sealed = false;
    }
    postings->sealed_count = 0;
}

void postings_clean(struct postings *postings)
{
    for (size_t i = 0; i < postings->changed_count; i++) {
        postings->chunks[postings->changed[i]].is_changed = false;
    }
    postings->changed_count = 0;
    postings->sealed_cut_count = postings->cut_count;
    postings_stored(postings);
}

static void let_go(struct postings *postings, uint32_t place)
{
    uint32_t word = postings->chunks[place].word;
    struct index_word *entry = index_find(&postings->index, word);
    assert(entry); /* of every chunk that is there */
    index_set_place(entry, postings->chunks[place].number, 0);
    if (entry->held == 0) {
        index_remove(&postings->index, word);
    }
    postings_free_place(postings, place);
}

void postings_trim(struct postings *postings, uint64_t bytes)
{
    /* Twice round at most: the first may find every chunk used. */
    size_t left = 2 * postings->chunk_count;
    left = left < POSTINGS_TRIM ? left : POSTINGS_TRIM;
    for (; left > 0 && postings_bytes(postings) > bytes; left--) {
        postings->hand = postings->hand + 1 < postings->chunk_count ? postings->hand + 1 : 0;
        struct chunk *chunk = &postings->chunks[postings->hand];
        if (!chunk->is_there || chunk->is_changed || chunk->is_sealed) {
            continue;
        }
        if (chunk->is_used) {
            chunk->is_used = false;
        } else {
            let_go(postings, (uint32_t)postings->hand);
        }
    }
}
