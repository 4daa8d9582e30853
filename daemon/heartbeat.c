#include "daemon/heartbeat.h"

/* The next count of this parity; only the thread itself changes its count. */
static void go_on(struct heartbeat *heartbeat, enum heart heart, uint64_t parity)
{
    uint64_t count = atomic_load_explicit(&heartbeat->counts[heart], memory_order_relaxed);
    count += count % 2 == parity ? 2 : 1;
    atomic_store_explicit(&heartbeat->counts[heart], count, memory_order_relaxed);
}

void heartbeat_work(struct heartbeat *heartbeat, enum heart heart)
{
    go_on(heartbeat, heart, 1);
}

void heartbeat_rest(struct heartbeat *heartbeat, enum heart heart)
{
    go_on(heartbeat, heart, 0);
}

enum heart heartbeat_look(const struct heartbeat *heartbeat, struct heartbeat_watch *watch)
{
    enum heart still = HEART_COUNT;
    for (int i = HEART_COUNT - 1; i >= 0; i--) {
        uint64_t count = atomic_load_explicit(&heartbeat->counts[i], memory_order_relaxed);
        if (count % 2 == 1 && count == watch->seen[i]) {
            still = (enum heart)i;
        }
        watch->seen[i] = count;
    }
    return still;
}

const char *heartbeat_name(enum heart heart)
{
    static const char *const NAMES[HEART_COUNT] = {[HEART_WRITER] = "the writer",
                                                   [HEART_TRAINER] = "the trainer",
                                                   [HEART_STORER] = "the storer of the model"};
    return heart < HEART_COUNT ? NAMES[heart] : "nobody";
}
