#include "client/args.h"

#include <errno.h>
#include <math.h>
#include <stdlib.h>
#include <string.h>

#include "client/format.h"
#include "client/text.h"

enum {
    WORD_BYTES = 32,   /* words longer than this are not compared */
    HELP_COLUMN = 24,  /* where the sentences begin */
    HELP_COLUMNS = 56, /* how wide they are set */
    VALUE_BYTES = 200  /* of a value quoted in a sentence */
};

int args_init(struct args *args, const struct args_option *options, size_t option_count)
{
    struct args_value *values = calloc(option_count > 0 ? option_count : 1, sizeof *values);
    if (!values) {
        return -1;
    }
    *args = (struct args){.options = options, .option_count = option_count, .values = values};
    return 0;
}

void args_deinit(struct args *args)
{
    for (size_t i = 0; i < args->option_count; i++) {
        free(args->values[i].list);
    }
    free(args->values);
    free(args->words);
    *args = (struct args){0};
}

unsigned args_distance(const char *a, const char *b)
{
    size_t a_length = strlen(a);
    size_t b_length = strlen(b);
    if (a_length >= WORD_BYTES || b_length >= WORD_BYTES) {
        return WORD_BYTES;
    }
    unsigned rows[3][WORD_BYTES]; /* of i, i - 1 and i - 2, each at i % 3 */
    for (size_t j = 0; j <= b_length; j++) {
        rows[0][j] = (unsigned)j;
    }
    for (size_t i = 1; i <= a_length; i++) {
        unsigned *row = rows[i % 3];
        const unsigned *above = rows[(i + 2) % 3];
        row[0] = (unsigned)i;
        for (size_t j = 1; j <= b_length; j++) {
            unsigned replaced = above[j - 1] + (a[i - 1] != b[j - 1] ? 1U : 0U);
            unsigned moved = (row[j - 1] < above[j] ? row[j - 1] : above[j]) + 1U;
            row[j] = replaced < moved ? replaced : moved;
            if (i > 1 && j > 1 && a[i - 1] == b[j - 2] && a[i - 2] == b[j - 1]) {
                unsigned swapped = rows[(i + 1) % 3][j - 2] + 1U;
                row[j] = swapped < row[j] ? swapped : row[j];
            }
        }
    }
    return rows[a_length % 3][b_length];
}

bool args_is_near(const char *given, const char *known)
{
    return args_distance(given, known) <= (strlen(known) < 8 ? 1U : 2U);
}

static int append(const char ***list, size_t *count, const char *word)
{
    const char **longer = reallocarray(*list, *count + 1, sizeof *longer);
    if (!longer) {
        return -1;
    }
    longer[*count] = word;
    *list = longer;
    *count += 1;
    return 0;
}

/* The option of that name (`length` bytes of it) and the place of its value; NULL if none is. */
static const struct args_option *find(struct args *const *levels, size_t level_count,
                                      const char *name, size_t length,
                                      struct args_value **ret_value)
{
    for (size_t level = 0; level < level_count; level++) {
        const struct args *args = levels[level];
        for (size_t i = 0; i < args->option_count; i++) {
            const char *known = args->options[i].name;
            if (strlen(known) == length && memcmp(known, name, length) == 0) {
                *ret_value = &args->values[i];
                return &args->options[i];
            }
        }
    }
    return NULL;
}

static int fail_unknown(struct args *const *levels, size_t level_count, const char *given,
                        const char *hint, struct failure *failure)
{
    size_t length = strcspn(given, "=");
    const char *near = NULL;
    char name[WORD_BYTES] = "";
    if (length > 2 && length - 2 < sizeof name) {
        memcpy(name, given + 2, length - 2);
        for (size_t level = 0; level < level_count; level++) {
            for (size_t i = 0; i < levels[level]->option_count; i++) {
                const char *known = levels[level]->options[i].name;
                near = args_is_near(name, known) ? known : near;
            }
        }
    }
    int shown = length < VALUE_BYTES ? (int)length : VALUE_BYTES;
    if (near) {
        return failure_set(failure, FAILURE_USAGE,
                           "there is no option %.*s here (is --%s meant?); %s", shown, given, near,
                           hint);
    }
    return failure_set(failure, FAILURE_USAGE, "there is no option %.*s here; %s", shown, given,
                       hint);
}

static int read_whole(const struct args_option *option, const char *text, struct args_value *value,
                      struct failure *failure)
{
    char *end = NULL;
    errno = 0;
    long long whole = strtoll(text, &end, 10);
    size_t digits = strspn(text, "0123456789");
    if (digits == 0 || text[digits] || *end || errno != 0 || (double)whole < option->least ||
        (double)whole > option->most) {
        char least[FORMAT_BYTES];
        char most[FORMAT_BYTES];
        bool bounded = option->most < 1e15;
        return failure_set(
            failure, FAILURE_USAGE, "--%s takes a whole number %s %s%s%s, not '%.*s'", option->name,
            bounded ? "from" : "of at least", format_count((int64_t)option->least, least),
            bounded ? " to " : "", bounded ? format_count((int64_t)option->most, most) : "",
            VALUE_BYTES, text);
    }
    value->whole = whole;
    return 0;
}

static int read_number(const struct args_option *option, const char *text, struct args_value *value,
                       struct failure *failure)
{
    char *end = NULL;
    double number = strtod(text, &end);
    size_t plain = strspn(text, "0123456789.eE+-");
    if (end == text || *end || text[plain] || !isfinite(number) || number < option->least ||
        number > option->most) {
        return failure_set(failure, FAILURE_USAGE, "--%s takes a number from %g to %g, not '%.*s'",
                           option->name, option->least, option->most, VALUE_BYTES, text);
    }
    value->number = number;
    return 0;
}

/* As the options of the daemon are written. */
static int read_size(const struct args_option *option, const char *text, struct args_value *value,
                     struct failure *failure)
{
    static const struct {
        const char *suffix;
        double bytes;
    } UNITS[] = {{"", 1}, {"KiB", 0x1p10}, {"MiB", 0x1p20}, {"GiB", 0x1p30}};
    char *end = NULL;
    double number = strtod(text, &end);
    size_t plain = strspn(text, "0123456789.");
    double bytes = NAN;
    for (size_t i = 0; i < sizeof UNITS / sizeof UNITS[0]; i++) {
        if (end == text + plain && strcmp(end, UNITS[i].suffix) == 0) {
            bytes = number * UNITS[i].bytes;
        }
    }
    if (plain == 0 || !(bytes >= option->least && bytes <= option->most) || bytes != floor(bytes)) {
        char least[FORMAT_BYTES];
        char most[FORMAT_BYTES];
        return failure_set(failure, FAILURE_USAGE,
                           "--%s takes a size from %s to %s bytes, such as 64MiB, not '%.*s'",
                           option->name, format_count((int64_t)option->least, least),
                           format_count((int64_t)option->most, most), VALUE_BYTES, text);
    }
    value->whole = (int64_t)bytes;
    return 0;
}

static int read_choice(const struct args_option *option, const char *text, struct failure *failure)
{
    size_t length = strlen(text);
    for (const char *word = option->value; *word;) {
        size_t bytes = strcspn(word, "|");
        if (bytes == length && memcmp(word, text, bytes) == 0) {
            return 0;
        }
        word += bytes + (word[bytes] == '|' ? 1 : 0);
    }
    return failure_set(failure, FAILURE_USAGE, "--%s takes %s, not '%.*s'", option->name,
                       option->value, VALUE_BYTES, text);
}

static int read_value(const struct args_option *option, const char *text, struct args_value *value,
                      struct failure *failure)
{
    size_t bad = 0;
    if (option->kind != ARGS_PATH && !text_is_utf8(text, strlen(text), &bad)) {
        return failure_set(failure, FAILURE_USAGE, "the value of --%s is not UTF-8 (byte %zu)",
                           option->name, bad + 1);
    }
    value->text = text;
    switch (option->kind) {
    case ARGS_LIST:
        return append(&value->list, &value->list_count, text) ? failure_memory(failure) : 0;
    case ARGS_WHOLE:
        return read_whole(option, text, value, failure);
    case ARGS_NUMBER:
        return read_number(option, text, value, failure);
    case ARGS_SIZE:
        return read_size(option, text, value, failure);
    case ARGS_CHOICE:
        return read_choice(option, text, failure);
    case ARGS_FLAG:
    case ARGS_TEXT:
    case ARGS_PATH:
        break;
    }
    return 0;
}

/* Reads the option that the cursor stands on, and its value. */
static int read_option(struct args *const *levels, size_t level_count, struct args_cursor *cursor,
                       const char *hint, struct failure *failure)
{
    const char *given = *cursor->at++;
    if (strcmp(given, "-h") == 0) {
        given = "--help";
    }
    struct args_value *value = NULL;
    const struct args_option *option = NULL;
    size_t length = strcspn(given, "=");
    if (length > 2 && given[1] == '-') {
        option = find(levels, level_count, given + 2, length - 2, &value);
    }
    if (!option) {
        return fail_unknown(levels, level_count, given, hint, failure);
    }
    const char *text = given[length] == '=' ? given + length + 1 : NULL;
    if (option->kind == ARGS_FLAG) {
        value->given = true;
        return text ? failure_set(failure, FAILURE_USAGE, "--%s takes no value; %s", option->name,
                                  hint)
                    : 0;
    }
    if (!text) {
        text = *cursor->at;
        if (!text) {
            return failure_set(failure, FAILURE_USAGE, "--%s needs a value: --%s %s; %s",
                               option->name, option->name, option->value, hint);
        }
        if (strncmp(text, "--", 2) == 0) {
            return failure_set(failure, FAILURE_USAGE,
                               "--%s needs a value (one that begins with dashes as --%s=%.*s)",
                               option->name, option->name, VALUE_BYTES, text);
        }
        cursor->at++;
    }
    if (value->given && option->kind != ARGS_LIST) {
        return failure_set(failure, FAILURE_USAGE, "--%s is given twice", option->name);
    }
    value->given = true;
    return read_value(option, text, value, failure);
}

int args_parse(struct args *const *levels, size_t level_count, struct args_cursor *cursor,
               bool stop_at_word, const char *hint, struct failure *failure)
{
    while (*cursor->at) {
        char *word = *cursor->at;
        if (!cursor->only_words && strcmp(word, "--") == 0) {
            cursor->only_words = true;
            cursor->at++;
            continue;
        }
        if (!cursor->only_words && word[0] == '-' && word[1]) {
            int code = read_option(levels, level_count, cursor, hint, failure);
            if (code) {
                return code;
            }
            continue;
        }
        if (stop_at_word) {
            return 0;
        }
        struct args *last = levels[level_count - 1];
        if (append(&last->words, &last->word_count, word)) {
            return failure_memory(failure);
        }
        cursor->at++;
    }
    return 0;
}

void args_help(const struct args_option *options, size_t option_count, FILE *stream)
{
    for (size_t i = 0; i < option_count; i++) {
        const struct args_option *option = &options[i];
        int used = fprintf(stream, "  --%s%s%s", option->name, option->value ? " " : "",
                           option->value ? option->value : "");
        const char *help = option->help;
        if (used < 0 || used >= HELP_COLUMN) {
            (void)fprintf(stream, "\n"); /* errors stay on the stream */
            used = 0;
        }
        while (*help) {
            size_t next = 0;
            size_t length = text_line(help, HELP_COLUMNS, &next);
            (void)fprintf(stream, "%*s%.*s\n", HELP_COLUMN - used, "", (int)length, help);
            help += next;
            used = 0;
        }
    }
}
