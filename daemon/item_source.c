#include "daemon/item_source.h"

#include <errno.h>
#include <string.h>

void item_source_deinit(struct item_source *source)
{
    field_list_deinit(&source->fields);
    json_decref(source->parsed_fields);
    *source = (struct item_source){0};
}

static int fill_fields(struct item_source *source, struct store_text fields)
{
    json_decref(source->parsed_fields);
    source->parsed_fields = NULL;
    source->fields.count = 0;
    if (fields.size == 0) {
        return 0;
    }
    json_error_t error;
    source->parsed_fields = json_loadb(fields.data, fields.size, 0, &error);
    if (!source->parsed_fields) {
        return json_error_code(&error) == json_error_out_of_memory ? -ENOMEM : -EINVAL;
    }
    struct fault fault = {0};
    if (fields_check(source->parsed_fields, "", &fault) < 0) {
        return -EINVAL;
    }
    return field_list_fill(&source->fields, source->parsed_fields);
}

int item_source_fill(struct item_source *source, const struct item_record *record)
{
    int code = fill_fields(source, record->fields);
    if (code < 0) {
        return code;
    }
    size_t language_bytes =
        record->language.size < sizeof source->language ? record->language.size : 0;
    memcpy(source->language, language_bytes ? record->language.data : "", language_bytes);
    source->language[language_bytes] = '\0';
    source->source = (struct features_source){.title = record->title.data,
                                              .title_bytes = record->title.size,
                                              .text = record->text.data,
                                              .text_bytes = record->text.size,
                                              .language = language_bytes ? source->language : NULL,
                                              .fields = source->fields.entries,
                                              .field_count = source->fields.count};
    return 0;
}

const char *item_source_longest(const struct features_source *source)
{
    size_t fields_bytes = 0;
    for (size_t i = 0; i < source->field_count; i++) {
        fields_bytes += strlen(source->fields[i].name) + strlen(source->fields[i].value);
    }
    if (fields_bytes > source->text_bytes && fields_bytes > source->title_bytes) {
        return "/fields";
    }
    return source->title_bytes > source->text_bytes ? "/title" : "/text";
}
