#include "daemon/learner/candidates.h"

#include <stdbool.h>

static bool is_before(float score, uint32_t tag, float other_score, uint32_t other_tag)
{
    return score > other_score || (score == other_score && tag < other_tag);
}

void candidates_insert(struct candidates *candidates, uint32_t tag, float score)
{
    size_t at = candidates->count;
    if (at == CANDIDATES_MOST) {
        if (!is_before(score, tag, candidates->scores[at - 1], candidates->tags[at - 1])) {
            return;
        }
        at--;
    } else {
        candidates->count++;
    }
    while (at > 0 && is_before(score, tag, candidates->scores[at - 1], candidates->tags[at - 1])) {
        candidates->scores[at] = candidates->scores[at - 1];
        candidates->tags[at] = candidates->tags[at - 1];
        at--;
    }
    candidates->scores[at] = score;
    candidates->tags[at] = tag;
}
