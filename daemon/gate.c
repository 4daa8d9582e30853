#include "daemon/gate.h"

#include "daemon/log.h"

void gate_tell(struct gate *gate, uint64_t now_ms)
{
    uint64_t held_back = log_limit_held_back(&gate->refusals, now_ms);
    if (held_back > 0) {
        log_line(LOG_CAUTION, "refused: %llu more calls, of which no line was written",
                 (unsigned long long)held_back);
    }
}

static void log_refusal(struct gate *gate, const struct method *method,
                        const struct rights_peer *peer, uint64_t now_ms)
{
    gate_tell(gate, now_ms);
    if (!log_limit_allows(&gate->refusals, now_ms)) {
        return;
    }
    const char *option = rights_option(method->right);
    if (peer->uid == RIGHTS_NO_ID) {
        log_line(LOG_CAUTION, "refused: %s to a peer that the system does not name", method->name);
    } else {
        log_line(LOG_CAUTION, "refused: %s to user %lu, who is not in %s", method->name,
                 (unsigned long)peer->uid, option);
    }
}

int gate_check(struct gate *gate, const struct method *method, const struct rights_peer *peer,
               uint64_t now_ms, struct fault *fault)
{
    if (rights_allow(&gate->options->may[method->right], &gate->house, peer)) {
        return 0;
    }
    log_refusal(gate, method, peer, now_ms);
    if (peer->uid == RIGHTS_NO_ID) {
        return fault_set(fault, FAULT_FORBIDDEN, NULL,
                         "%s takes the right %s, and the system does not say who you are.",
                         method->name, rights_purpose(method->right));
    }
    return fault_set(fault, FAULT_FORBIDDEN, NULL,
                     "%s takes the right %s, which user %lu does not have; the daemon's option %s "
                     "grants it.",
                     method->name, rights_purpose(method->right), (unsigned long)peer->uid,
                     rights_option(method->right));
}
