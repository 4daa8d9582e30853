/* What of the postings has changed, to be stored, and how memory lets go of what is stored. */
#include <errno.h>
#include <stdlib.h>

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

/* In place of the list its places by rising word and number, each once; those that are gone are
 * left out. */
static size_t sort_changed(const struct postings *postings, struct listed *list, uint32_t *places)
{
    size_t count = 0;
    for (size_t i = 0; i < postings->changed_count; i++) {
        uint32_t place = postings->changed[i];
        const struct chunk *chunk = &postings->chunks[place];
        if (chunk->is_there && chunk->is_changed) {
            list[count++] = (struct listed){(uint64_t)chunk->word << 32U | chunk->number, place};
        }
    }
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
    size_t most = postings->changed_count;
    struct listed *list = calloc(most + 1, sizeof *list);
    uint32_t *places = calloc(most + 1, sizeof *places);
    if (!list || !places) {
        free(list);
        free(places);
        return -ENOMEM;
    }
    *ret_count = sort_changed(postings, list, places);
    *ret_places = places;
    free(list);
    return 0;
}

size_t postings_changed_count(const struct postings *postings)
{
    return postings->changed_count;
}

const struct postings_cut *postings_cuts(const struct postings *postings, size_t *ret_count)
{
    *ret_count = postings->cut_count;
    return postings->cuts;
}

void postings_clean(struct postings *postings)
{
    for (size_t i = 0; i < postings->cut_count; i++) {
        const struct index_word *entry = index_find(&postings->index, postings->cuts[i].word);
        if (entry && entry->chunk_count == 0) {
            index_remove(&postings->index, postings->cuts[i].word);
        }
    }
    postings->cut_count = 0;
    for (size_t i = 0; i < postings->changed_count; i++) {
        postings->chunks[postings->changed[i]].is_changed = false;
    }
    postings->changed_count = 0;
}

static void let_go(struct postings *postings, uint32_t place)
{
    uint32_t word = postings->chunks[place].word;
    struct index_word *entry = index_find(&postings->index, word);
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
        if (!chunk->is_there || chunk->is_changed) {
            continue;
        }
        if (chunk->is_used) {
            chunk->is_used = false;
        } else {
            let_go(postings, (uint32_t)postings->hand);
        }
    }
}
