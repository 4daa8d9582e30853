#include "client/screen.h"

#include <stdlib.h>
#include <string.h>
#include <strings.h>
#include <sys/ioctl.h>
#include <unistd.h>

enum {
    USUAL_WIDTH = 80
};

static bool is_set(const char *value)
{
    return value && *value;
}

bool screen_wants_colour(bool terminal, const char *no_color, const char *term)
{
    return terminal && !is_set(no_color) && is_set(term) && strcmp(term, "dumb") != 0;
}

bool screen_wants_unicode(const char *lc_all, const char *lc_ctype, const char *lang)
{
    const char *locale = is_set(lc_all) ? lc_all : is_set(lc_ctype) ? lc_ctype : lang;
    if (!is_set(locale)) {
        return true; /* nothing is said; stored text is UTF-8 anyway */
    }
    return strcasestr(locale, "utf-8") || strcasestr(locale, "utf8");
}

void screen_measure(struct screen *screen)
{
    if (!screen->terminal) {
        screen->width = 0;
        return;
    }
    struct winsize size = {0};
    screen->width = USUAL_WIDTH;
    if (ioctl(fileno(screen->stream), TIOCGWINSZ, &size) == 0 && size.ws_col > 0) {
        screen->width = size.ws_col;
    }
}

void screen_init(struct screen *screen, FILE *stream)
{
    screen->stream = stream;
    screen->terminal = isatty(fileno(stream)) == 1;
    screen->renews = screen_wants_colour(screen->terminal, NULL, getenv("TERM"));
    screen->colour = screen_wants_colour(screen->terminal, getenv("NO_COLOR"), getenv("TERM"));
    screen->unicode = screen_wants_unicode(getenv("LC_ALL"), getenv("LC_CTYPE"), getenv("LANG"));
    screen_measure(screen);
}

const char *screen_begin(const struct screen *screen, enum screen_style style)
{
    if (!screen->colour) {
        return "";
    }
    switch (style) {
    case SCREEN_HEADING:
        return "\033[1m";
    case SCREEN_BAR:
        return "\033[36m";
    case SCREEN_QUIET:
        return "\033[2m";
    case SCREEN_PLAIN:
        break;
    }
    return "";
}

const char *screen_end(const struct screen *screen, enum screen_style style)
{
    return screen->colour && style != SCREEN_PLAIN ? "\033[0m" : "";
}
