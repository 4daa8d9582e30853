/*
 * gate: whether a peer may call a method, by the options in force; refusals are logged, few at a
 * time. Loop thread only.
 */
#ifndef UNDERTAG_GATE_H
#define UNDERTAG_GATE_H

#include "daemon/call.h"
#include "daemon/log_limit.h"
#include "daemon/options.h"

struct gate {
    const struct options *options; /* borrowed; as they are at each call */
    struct rights_house house;
    struct log_limit refusals;
};

/* Returns 0, or FAULT_FORBIDDEN with the fault filled. */
int gate_check(struct gate *gate, const struct method *method, const struct rights_peer *peer,
               uint64_t now_ms, struct fault *fault) __attribute__((warn_unused_result));

/* Logs what was held back; to be called now and then. */
void gate_tell(struct gate *gate, uint64_t now_ms);

#endif
