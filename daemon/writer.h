/*
 * writer: the one thread that changes the store. Changes are committed in groups, so that one sync
 * of the disk serves many; a change is done when its group is durable, or refused.
 */
#ifndef UNDERTAG_WRITER_H
#define UNDERTAG_WRITER_H

#include <stdbool.h>
#include <stddef.h>

#include "daemon/backlog.h"
#include "daemon/text/features.h"
#include "daemon/troubles.h"
#include "storage/items_examine.h"

struct writer;

/* What matters of the filing, beside its id, stored_at_ms and uid: */
enum change_kind {
    CHANGE_FILE,      /* everything */
    CHANGE_WITHDRAW,  /* nothing */
    CHANGE_RULE,      /* tags: those that belong; declined: those that do not; tagger: the editor */
    CHANGE_CHECK,     /* tags: the complete list; tagger: the checker */
    CHANGE_TAG_AGAIN, /* tags, tagger, filed_at, open_unknown */
};

/* A change on its way; belongs to the caller, who leaves it alone until it is done. */
struct change {
    struct change *next;
    enum change_kind kind;
    struct item_filing filing;
    const struct features_source *counted; /* NULL: it cannot hold too many different words */
    size_t words_limit;
    bool is_random; /* of a check: the item was drawn at random */

    /* The outcome. */
    enum store_code code;
    bool has_too_many_words;
    struct item_filed filed;
    struct item_checked checked; /* of a check; the owner frees the lists */
    struct item_refusal refusal;
    struct store_error error;
};

/* All borrowed for the writer's life. */
struct writer_settings {
    struct store *store;
    struct backlog *backlog;
    struct troubles *troubles;
    const struct features_settings *features;
    void *user;
    void (*done)(void *user); /* writer_take_done has something; writer's thread */
};

/* Starts the thread. Returns 0 or a negative errno. */
int writer_new(const struct writer_settings *settings, struct writer **ret_writer)
    __attribute__((warn_unused_result));

/* Commits what is queued, ends the thread and frees the writer. */
void writer_free(struct writer *writer);

/* Counts other words from now on; where there is no memory for it, those it counted before. Any
 * thread. */
void writer_use_words(struct writer *writer, const struct features_settings *settings);

/* Queues a change. Any thread. */
void writer_push(struct writer *writer, struct change *change);

/* Takes the changes that are done, linked in the order in which they were pushed. Any thread. */
struct change *writer_take_done(struct writer *writer);

/* Has it look at the backlog's `kept` again: more may be erased. Any thread. */
void writer_wake(struct writer *writer);

#endif
