/*
 * troubles: what is wrong right now, a sentence each, for daemon.state and the log. A trouble is
 * logged when it begins and when it is over, not each time it is met. Any thread.
 */
#ifndef UNDERTAG_TROUBLES_H
#define UNDERTAG_TROUBLES_H

#include <pthread.h>

enum trouble {
    TROUBLE_STORING,    /* changes cannot be written */
    TROUBLE_ERASING,    /* what was erased may still be in the store's file */
    TROUBLE_FORGETTING, /* what was forgotten may still be in the model's */
    TROUBLE_LEARNING,   /* learning has stopped */
    TROUBLE_KEEPING,    /* what was learned cannot be written */
    TROUBLE_REBUILDING, /* the last rebuild has failed */
    TROUBLE_EXPORTING,  /* the last snapshot has failed */
    TROUBLE_MEMORY,     /* the budget is too small for the vocabulary */
    TROUBLE_KINDS
};

enum {
    TROUBLE_BYTES = 512
};

struct troubles {
    pthread_mutex_t mutex;
    char sentences[TROUBLE_KINDS][TROUBLE_BYTES]; /* "": none */
};

int troubles_init(struct troubles *troubles) __attribute__((warn_unused_result));
void troubles_deinit(struct troubles *troubles);

void troubles_begin(struct troubles *troubles, enum trouble trouble, const char *format, ...)
    __attribute__((format(printf, 3, 4)));
void troubles_end(struct troubles *troubles, enum trouble trouble);

/* Copies a sentence out; "" while there is no such trouble. */
void troubles_read(struct troubles *troubles, enum trouble trouble, char sentence[TROUBLE_BYTES]);

#endif
