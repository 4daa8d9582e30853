#include "daemon/learner/model_parts.h"

#include <errno.h>
#include <stdlib.h>
#include <string.h>

#include "daemon/learner/model_private.h"

static int put_words(const struct model *model, const struct model_sink *sink)
{
    for (size_t i = 0; i < model->forgotten_count; i++) {
        const struct forgotten_word *gone = &model->forgotten[i];
        struct model_word word = {
            .term = gone->term, .term_bytes = gone->term_bytes, .number = gone->number};
        int result = sink->forgotten(sink->user, &word);
        if (result != 0) {
            return result;
        }
    }
    for (size_t i = 0; i < model->changed_words.count; i++) {
        struct model_word word = {.number = model->changed_words.list[i]};
        word.term = dictionary_term(model->dictionary, word.number, &word.term_bytes);
        if (!word.term) {
            continue; /* changed and then forgotten */
        }
        word.count = dictionary_count(model->dictionary, word.number);
        int result = sink->word(sink->user, &word);
        if (result != 0) {
            return result;
        }
    }
    return 0;
}

static int put_tag(const struct model *model, const struct model_sink *sink, uint32_t number)
{
    struct weights_bias bias = weights_bias(model->weights, number);
    struct model_tag tag = {.number = number,
                            .count = model->tags[number].count,
                            .unprompted = model->tags[number].unprompted,
                            .bias = bias.value,
                            .bias_accumulator = bias.accumulator};
    return sink->tag(sink->user, &tag);
}

static int put_bins(const struct model *model, const struct model_sink *sink)
{
    for (uint32_t b = 0; b < CALIBRATION_BINS; b++) {
        if (model->calibration.changed[b]) {
            int result = sink->bin(sink->user, b, &model->calibration.bins[b]);
            if (result != 0) {
                return result;
            }
        }
    }
    return 0;
}

int model_changes(const struct model *model, const struct model_sink *sink)
{
    int result = put_words(model, sink);
    if (result == 0) {
        result = weights_changed_chunks(model->weights, sink->chunk, sink->user);
    }
    const struct marks *tags = weights_changed_tags(model->weights);
    for (size_t i = 0; i < tags->count && result == 0; i++) {
        result = put_tag(model, sink, tags->list[i]);
    }
    if (result == 0) {
        result = put_bins(model, sink);
    }
    if (result == 0) {
        struct model_totals totals = {.documents = model->documents,
                                      .factor_count = model->factor_count,
                                      .factor_sum = model->factor_sum,
                                      .calibration_gain = model->calibration.gain};
        result = sink->totals(sink->user, &totals);
    }
    return result;
}

void model_clean(struct model *model)
{
    for (size_t i = 0; i < model->forgotten_count; i++) {
        free(model->forgotten[i].term);
    }
    model->forgotten_count = 0;
    marks_clear(&model->changed_words);
    weights_clean(model->weights);
    memset(model->calibration.changed, 0, sizeof model->calibration.changed);
}

int model_restore_word(struct model *model, const struct model_word *word)
{
    return dictionary_restore(model->dictionary, word->term, word->term_bytes, word->number,
                              word->count);
}

int model_restore_chunk(struct model *model, const struct weights_chunk *chunk)
{
    for (uint32_t i = 0; i < chunk->count; i++) {
        if (model_reserve_tags(model, (size_t)chunk->tags[i] + 1) < 0) {
            return -ENOMEM;
        }
    }
    return weights_restore_chunk(model->weights, chunk);
}

int model_restore_tag(struct model *model, const struct model_tag *tag)
{
    if (model_reserve_tags(model, (size_t)tag->number + 1) < 0) {
        return -ENOMEM;
    }
    model_set_tag_counts(model, tag->number,
                         (struct tag_counts){.count = tag->count, .unprompted = tag->unprompted});
    return weights_restore_bias(
        model->weights, tag->number,
        (struct weights_bias){.value = tag->bias, .accumulator = tag->bias_accumulator});
}

int model_restore_bin(struct model *model, uint32_t number, const struct calibration_bin *bin)
{
    if (number >= CALIBRATION_BINS) {
        return -EINVAL;
    }
    model->calibration.bins[number] = *bin;
    return 0;
}

int model_restore_totals(struct model *model, const struct model_totals *totals)
{
    model->documents = totals->documents;
    model->factor_count = totals->factor_count;
    model->factor_sum = totals->factor_sum;
    model->calibration.gain = totals->calibration_gain;
    return 0;
}

int model_restored(struct model *model)
{
    model->version++;
    memset(model->calibration.changed, 0, sizeof model->calibration.changed);
    return dictionary_restored(model->dictionary);
}
