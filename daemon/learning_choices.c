#include "daemon/learning_choices.h"

#include <assert.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

enum {
    FORMAT = 1
};

static const char NUMBER_LINE[] = "rebuild=";

void learning_choose(const struct options *configured, const struct options *wanted,
                     uint64_t number, uint64_t seq, struct learning_choices *ret_choices)
{
    *ret_choices = (struct learning_choices){.number = number, .seq = seq};
    for (size_t i = 0; i < options_count(); i++) {
        struct options_row said;
        struct options_row chosen;
        options_describe(configured, i, &said);
        options_describe(wanted, i, &chosen);
        if (said.group != OPTIONS_LEARNING || strcmp(said.value, chosen.value) == 0) {
            continue;
        }
        assert(ret_choices->count < LEARNING_CHOICES_MOST);
        struct learning_choice *choice = &ret_choices->list[ret_choices->count++];
        (void)snprintf(choice->name, sizeof choice->name, "%s", chosen.name);
        memcpy(choice->value, chosen.value, sizeof choice->value);
        memcpy(choice->configured, said.value, sizeof choice->configured);
    }
}

/* Whether the configuration says of it what it said, and it can be set. */
static bool holds(const struct learning_choice *choice, const struct options *configured,
                  struct options *into)
{
    char error[OPTIONS_ERROR_BYTES];
    struct options_row row;
    size_t at = options_find(choice->name);
    if (at == options_count()) {
        return false; /* an option of another version */
    }
    options_describe(configured, at, &row);
    return row.group == OPTIONS_LEARNING && strcmp(row.value, choice->configured) == 0 &&
           options_set(into, choice->name, choice->value, error) == 0;
}

size_t learning_lay_over(struct learning_choices *choices, struct options *options, char *ret_first)
{
    const struct options configured = *options;
    size_t kept = 0;
    size_t dropped = 0;
    for (size_t i = 0; i < choices->count; i++) {
        const struct learning_choice choice = choices->list[i];
        if (holds(&choice, &configured, options)) {
            choices->list[kept++] = choice;
        } else if (dropped++ == 0) {
            memcpy(ret_first, choice.name, sizeof choice.name);
        }
    }
    choices->count = kept;
    return dropped;
}

int learning_text(const struct options *options, uint64_t number, char *text, size_t size)
{
    if (options_learning_text(options, text, size) < 0) {
        return -1;
    }
    if (number == 0) {
        return 0;
    }
    size_t used = strlen(text);
    int written =
        snprintf(text + used, size - used, "%s%llu\n", NUMBER_LINE, (unsigned long long)number);
    return written < 0 || (size_t)written >= size - used ? -1 : 0;
}

uint64_t learning_number_of(const char *text)
{
    const char *line = strstr(text, "\nrebuild=");
    return line ? strtoull(line + sizeof NUMBER_LINE, NULL, 10) : 0;
}

/* --- records ------------------------------------------------------------------------------------
 */

static void put_text(struct codec_writer *record, const char *text)
{
    codec_put_blob(record, text, strlen(text));
}

/* Fails the record where the text does not fit. */
static void get_text(struct codec_reader *record, char *into, size_t size)
{
    size_t bytes = 0;
    const char *text = codec_get_blob(record, &bytes);
    if (record->failed || bytes >= size) {
        record->failed = true;
        return;
    }
    memcpy(into, text, bytes);
    into[bytes] = '\0';
}

void learning_choices_put(const struct learning_choices *choices, struct codec_writer *record)
{
    codec_put_u32(record, FORMAT);
    codec_put_u64(record, choices->number);
    codec_put_u64(record, choices->seq);
    codec_put_u32(record, (uint32_t)choices->count);
    for (size_t i = 0; i < choices->count; i++) {
        put_text(record, choices->list[i].name);
        put_text(record, choices->list[i].value);
        put_text(record, choices->list[i].configured);
    }
}

int learning_choices_get(struct codec_reader *record, struct learning_choices *ret_choices)
{
    struct learning_choices choices = {0};
    uint32_t format = codec_get_u32(record);
    choices.number = codec_get_u64(record);
    choices.seq = codec_get_u64(record);
    choices.count = codec_get_u32(record);
    if (record->failed || format != FORMAT || choices.count > LEARNING_CHOICES_MOST) {
        return -1;
    }
    for (size_t i = 0; i < choices.count; i++) {
        struct learning_choice *choice = &choices.list[i];
        get_text(record, choice->name, sizeof choice->name);
        get_text(record, choice->value, sizeof choice->value);
        get_text(record, choice->configured, sizeof choice->configured);
    }
    if (record->failed) {
        return -1;
    }
    *ret_choices = choices;
    return 0;
}
