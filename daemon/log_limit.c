#include "daemon/log_limit.h"

static bool is_over(const struct log_limit *limit, uint64_t now_ms)
{
    return limit->logged == 0 || now_ms - limit->since_ms >= LOG_LIMIT_SPAN_MS;
}

bool log_limit_allows(struct log_limit *limit, uint64_t now_ms)
{
    if (is_over(limit, now_ms)) {
        limit->since_ms = now_ms;
        limit->logged = 0;
    }
    if (limit->logged == LOG_LIMIT_LINES) {
        limit->held_back++;
        return false;
    }
    limit->logged++;
    return true;
}

uint64_t log_limit_held_back(struct log_limit *limit, uint64_t now_ms)
{
    if (!is_over(limit, now_ms)) {
        return 0;
    }
    uint64_t held_back = limit->held_back;
    limit->held_back = 0;
    return held_back;
}
