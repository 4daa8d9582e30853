#include "client/progress.h"

#include <math.h>
#include <stdio.h>
#include <string.h>

#include "client/bar.h"
#include "client/format.h"
#include "client/text.h"

enum {
    SAMPLE_MS = 500, /* the rate is taken over at least this long */
    BAR_COLUMNS = 24,
    PART_BYTES = 160
};

static const double SMOOTHING = 0.3; /* the weight of the latest rate */

void progress_init(struct progress *progress, struct screen *screen, uint64_t total, int64_t now_ms)
{
    *progress = (struct progress){.screen = screen,
                                  .total = total,
                                  .started_ms = now_ms,
                                  .written_ms = -1,
                                  .sample_ms = now_ms,
                                  .rate = -1};
}

/* Adds a part behind three spaces if the line stays within its columns. */
static bool add_part(char *line, size_t *columns_left, const char *part)
{
    size_t gap = *line ? 3 : 0;
    size_t columns = gap + text_width(part);
    size_t length = strlen(line);
    if (columns > *columns_left || length + gap + strlen(part) >= PROGRESS_BYTES) {
        return false;
    }
    memset(line + length, ' ', gap);
    (void)stpcpy(line + length + gap, part);
    *columns_left -= columns;
    return true;
}

void progress_format(const struct progress_view *view, size_t columns, bool unicode,
                     char line[PROGRESS_BYTES])
{
    char part[PART_BYTES];
    char figure[FORMAT_BYTES];
    size_t left = columns;
    line[0] = '\0';
    if (view->total > 0) {
        double share = (double)view->done / (double)view->total;
        char bar[BAR_BYTES];
        bar_draw(share, BAR_COLUMNS, unicode, bar);
        int pad = BAR_COLUMNS - (int)text_width(bar);
        (void)snprintf(part, sizeof part, "%s%*s %3.0f %%", bar, pad, "",
                       floor(100 * fmin(share, 1)));
        if (left <
            (size_t)2 * (BAR_COLUMNS + 6)) { /* in a narrow terminal the figures matter more */
            (void)snprintf(part, sizeof part, "%3.0f %%", floor(100 * fmin(share, 1)));
        }
        (void)add_part(line, &left, part); /* false: the next may still fit */
    }
    if (view->is_size) {
        (void)snprintf(part, sizeof part, "%s", format_size((double)view->count, figure));
    } else {
        (void)snprintf(part, sizeof part, "%s %s%s", format_count((int64_t)view->count, figure),
                       view->noun ? view->noun : "item", view->count == 1 ? "" : "s");
    }
    if (!add_part(line, &left, part) || view->rate < 0) {
        return;
    }
    (void)snprintf(part, sizeof part, "%s a second",
                   view->is_size ? format_size(view->rate, figure)
                                 : format_count(llround(view->rate), figure));
    if (!add_part(line, &left, part) || view->seconds_left < 0) {
        return;
    }
    (void)snprintf(part, sizeof part, "%s left", format_duration(view->seconds_left, figure));
    (void)add_part(line, &left, part); /* the last part */
}

static void take_rate(struct progress *progress, uint64_t count, int64_t now_ms)
{
    int64_t passed_ms = now_ms - progress->sample_ms;
    if (passed_ms < SAMPLE_MS) {
        return;
    }
    double rate = 1000.0 * (double)(count - progress->sample_count) / (double)passed_ms;
    progress->rate =
        progress->rate < 0 ? rate : SMOOTHING * rate + (1 - SMOOTHING) * progress->rate;
    progress->sample_ms = now_ms;
    progress->sample_count = count;
}

/* By what is done of the whole since the start, which wavers less than the latest rate. */
static double seconds_left(const struct progress *progress, uint64_t done, int64_t now_ms)
{
    if (progress->total == 0 || done == 0 || done > progress->total || progress->rate < 0) {
        return -1;
    }
    double passed = (double)(now_ms - progress->started_ms) / 1000;
    return passed * (double)(progress->total - done) / (double)done;
}

void progress_expect(struct progress *progress, uint64_t total)
{
    progress->total = total;
}

void progress_update(struct progress *progress, uint64_t count, uint64_t done, int64_t now_ms)
{
    struct screen *screen = progress->screen;
    if (!screen->renews) {
        return;
    }
    take_rate(progress, count, now_ms);
    if (progress->written_ms >= 0 && now_ms - progress->written_ms < PROGRESS_RENEW_MS) {
        return;
    }
    progress->written_ms = now_ms;
    screen_measure(screen);
    struct progress_view view = {.count = count,
                                 .noun = progress->noun,
                                 .is_size = progress->is_size,
                                 .done = done,
                                 .total = progress->total,
                                 .rate = progress->rate,
                                 .seconds_left = seconds_left(progress, done, now_ms)};
    char line[PROGRESS_BYTES];
    /* The last column stays free: some terminals begin a new line when it is written. */
    progress_format(&view, screen->width - 1, screen->unicode, line);
    size_t bar = view.total > 0 ? strcspn(line, " 0123456789") : 0;
    (void)fprintf(screen->stream, "\r%s%.*s%s%s\033[K", screen_begin(screen, SCREEN_BAR), (int)bar,
                  line, screen_end(screen, SCREEN_BAR), line + bar);
    (void)fflush(screen->stream); /* a line of progress that is lost does no harm */
    progress->shown = true;
}

void progress_clear(struct progress *progress)
{
    if (progress->shown) {
        (void)fputs("\r\033[K", progress->screen->stream);
        (void)fflush(progress->screen->stream);
        progress->shown = false;
    }
}
