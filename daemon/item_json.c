#include "daemon/item_json.h"

#include <stdlib.h>
#include <string.h>

#include "daemon/answer.h"
#include "daemon/times.h"
#include "storage/vocabulary.h"

struct named {
    json_t *name;
};

static int compare_names(const void *left, const void *right)
{
    return strcmp(json_string_value(((const struct named *)left)->name),
                  json_string_value(((const struct named *)right)->name));
}

json_t *item_names_json(struct store_view *view, struct numbers tags, struct store_error *error)
{
    struct vocabulary_tag tag;
    json_t *names = json_array();
    struct named *sorted = calloc(tags.count + 1, sizeof *sorted);
    size_t made = 0;
    int code = names && sorted ? 0 : -1;
    while (code == 0 && made < tags.count) {
        code = vocabulary_get(view, tags.list[made], &tag, error) == STORE_OK ? 0 : -1;
        if (code == 0) {
            sorted[made].name = json_string(tag.name);
            code = sorted[made].name ? 0 : -1;
            made += code == 0;
        }
    }
    if (made > 0) {
        qsort(sorted, made, sizeof *sorted, compare_names);
    }
    for (size_t i = 0; i < made; i++) {
        code |= json_array_append_new(names, sorted[i].name);
    }
    free(sorted);
    if (code == 0) {
        return names;
    }
    json_decref(names);
    return NULL;
}

json_t *item_text_json(struct store_text text)
{
    return json_stringn(text.size > 0 ? text.data : "", text.size);
}

static json_t *text_or_null(struct store_text text)
{
    return text.size > 0 ? item_text_json(text) : json_null();
}

json_t *item_fields_json(struct store_text fields)
{
    return fields.size > 0 ? json_loadb(fields.data, fields.size, 0, NULL) : json_object();
}

static json_t *time_json(int64_t time_ms)
{
    char text[TIMES_BYTES];
    times_format(time_ms, text);
    return json_string(text);
}

/* The user that a change came from; null where that was not noted. */
static json_t *uid_json(uint32_t uid)
{
    return uid == ITEM_NO_UID ? json_null() : json_integer((json_int_t)uid);
}

static json_t *check_json(struct store_view *view, const struct item_check *check,
                          struct store_error *error)
{
    if (!check->is_there) {
        return json_null();
    }
    json_t *tags = item_names_json(view, check->tags, error);
    return tags ? json_pack("{s:o, s:s, s:o, s:o, s:o}", "tags", tags, "drawn",
                            check->is_random ? "random" : "picked", "at", time_json(check->at_ms),
                            "checker", text_or_null(check->checker), "uid", uid_json(check->uid))
                : NULL;
}

static json_t *seconds_json(struct store_view *view, const struct item_record *record,
                            struct store_error *error)
{
    json_t *seconds = json_array();
    for (size_t i = 0; seconds && i < record->second_count; i++) {
        const struct item_second *second = &record->seconds[i];
        json_t *tags = item_names_json(view, second->tags, error);
        json_t *entry =
            tags ? json_pack("{s:o, s:o, s:o, s:o}", "tagger", item_text_json(second->tagger),
                             "tags", tags, "filed_at", text_or_null(second->filed_at), "uid",
                             uid_json(second->uid))
                 : NULL;
        if (json_array_append_new(seconds, entry) < 0) {
            json_decref(seconds);
            return NULL;
        }
    }
    return seconds;
}

static json_t *rulings_json(struct store_view *view, const struct item_record *record,
                            struct store_error *error)
{
    struct vocabulary_tag tag;
    json_t *rulings = json_array();
    for (size_t i = 0; rulings && i < record->ruling_count; i++) {
        const struct item_ruling *ruling = &record->rulings[i];
        json_t *entry = NULL;
        if (vocabulary_get(view, ruling->tag, &tag, error) == STORE_OK) {
            entry = json_pack("{s:s, s:b, s:o, s:o, s:o}", "tag", tag.name, "belongs",
                              (int)ruling->belongs, "editor", text_or_null(ruling->editor), "at",
                              time_json(ruling->at_ms), "uid", uid_json(ruling->uid));
        }
        if (json_array_append_new(rulings, entry) < 0) {
            json_decref(rulings);
            return NULL;
        }
    }
    return rulings;
}

json_t *item_json(struct store_view *view, const struct item_record *record,
                  struct store_error *error)
{
    json_t *item = json_object();
    answer_add(&item, "id", item_text_json(record->id));
    answer_add(&item, "seq", json_integer((json_int_t)record->seq));
    answer_add(&item, "title", item_text_json(record->title));
    answer_add(&item, "text", item_text_json(record->text));
    answer_add(&item, "fields", item_fields_json(record->fields));
    answer_add(&item, "language", text_or_null(record->language));
    answer_add(&item, "tagger", text_or_null(record->tagger));
    answer_add(&item, "uid", uid_json(record->filed_uid));
    answer_add(&item, "filed_at", text_or_null(record->filed_at));
    answer_add(&item, "stored_at", time_json(record->filed_stored_at_ms));
    answer_add(&item, "tags", item_names_json(view, record->tags, error));
    answer_add(&item, "filed", item_names_json(view, record->filed, error));
    answer_add(&item, "prompted", item_names_json(view, record->prompted, error));
    answer_add(&item, "declined", item_names_json(view, record->declined, error));
    answer_add(&item, "belongs", item_names_json(view, record->belongs, error));
    answer_add(&item, "not", item_names_json(view, record->denied, error));
    answer_add(&item, "rulings", rulings_json(view, record, error));
    answer_add(&item, "checked", check_json(view, &record->check, error));
    answer_add(&item, "second", seconds_json(view, record, error));
    return item;
}
