#include "daemon/params.h"

#include <stdlib.h>
#include <string.h>
#include <uninorm.h>

#include "daemon/pointer.h"
#include "daemon/times.h"

/* Refuses a member for what it is. */
static int refuse(struct fault *fault, const char *member, const char *sentence)
{
    char pointer[FAULT_FIELD_BYTES];
    pointer_to_member(pointer, sizeof pointer, "", member);
    return fault_set(fault, FAULT_PARAMS, pointer, "%s %s", member, sentence);
}

int params_known(const json_t *params, const char *const *names, struct fault *fault)
{
    const char *member = NULL;
    const json_t *value = NULL;
    json_object_foreach((json_t *)params, member, value)
    {
        size_t i = 0;
        while (names[i] && strcmp(names[i], member) != 0) {
            i++;
        }
        if (!names[i]) {
            char pointer[FAULT_FIELD_BYTES];
            pointer_to_member(pointer, sizeof pointer, "", member);
            return fault_set(fault, FAULT_PARAMS, pointer, "There is no member '%.100s' here.",
                             member);
        }
    }
    return 0;
}

bool params_has(const json_t *params, const char *member)
{
    return json_object_get(params, member) != NULL;
}

/* --- names --------------------------------------------------------------------------------------
 */

static bool is_ascii(const char *text, size_t bytes)
{
    for (size_t i = 0; i < bytes; i++) {
        if ((unsigned char)text[i] >= 0x80) {
            return false;
        }
    }
    return true;
}

/* C0, DEL and C1 (U+0080 to U+009F, which is C2 80 to C2 9F in UTF-8). */
static bool has_control(const char *text, size_t bytes)
{
    for (size_t i = 0; i < bytes; i++) {
        unsigned char c = (unsigned char)text[i];
        if (c < 0x20 || c == 0x7F ||
            (c == 0xC2 && i + 1 < bytes && (unsigned char)text[i + 1] < 0xA0)) {
            return true;
        }
    }
    return false;
}

static bool is_nfc(const char *text, size_t bytes)
{
    if (is_ascii(text, bytes)) {
        return true;
    }
    size_t length = 0;
    uint8_t *normal = u8_normalize(UNINORM_NFC, (const uint8_t *)text, bytes, NULL, &length);
    bool same = normal && length == bytes && memcmp(normal, text, bytes) == 0;
    free(normal);
    return same;
}

/* What is wrong with a name; NULL: nothing. */
static const char *wrong_with_name(const json_t *value)
{
    if (!json_is_string(value)) {
        return "is a string.";
    }
    const char *text = json_string_value(value);
    size_t bytes = json_string_length(value);
    if (bytes < 1 || bytes > PARAMS_NAME_BYTES) {
        return "is 1 to 255 bytes of UTF-8.";
    }
    if (has_control(text, bytes)) {
        return "holds no control characters.";
    }
    return is_nfc(text, bytes) ? NULL : "is in Unicode's Normalization Form C (NFC).";
}

static struct store_text text_of(const json_t *value)
{
    return (struct store_text){.data = json_string_value(value), .size = json_string_length(value)};
}

int params_name(const json_t *params, const char *member, struct store_text *ret_name,
                struct fault *fault)
{
    const json_t *value = json_object_get(params, member);
    const char *wrong = value ? wrong_with_name(value) : "is missing.";
    if (wrong) {
        return refuse(fault, member, wrong);
    }
    *ret_name = text_of(value);
    return 0;
}

int params_optional_name(const json_t *params, const char *member, struct store_text *ret_name,
                         struct fault *fault)
{
    if (!params_has(params, member)) {
        *ret_name = (struct store_text){.data = ""};
        return 0;
    }
    return params_name(params, member, ret_name, fault);
}

void params_names_deinit(struct params_names *names)
{
    free(names->names);
    free(names->given_at);
    *names = (struct params_names){0};
}

static int compare_texts(struct store_text left, struct store_text right)
{
    size_t common = left.size < right.size ? left.size : right.size;
    int order = memcmp(left.data, right.data, common);
    return order != 0 ? order : (left.size > right.size) - (left.size < right.size);
}

/* Orders places in a list of strings by what stands there, then by place. */
static int compare_places(const void *left, const void *right, void *list)
{
    size_t a = *(const size_t *)left;
    size_t b = *(const size_t *)right;
    int order = compare_texts(text_of(json_array_get(list, a)), text_of(json_array_get(list, b)));
    return order != 0 ? order : (a > b) - (a < b);
}

static int check_names(const json_t *list, const char *member, struct fault *fault)
{
    if (!json_is_array(list)) {
        return refuse(fault, member, "is an array of strings.");
    }
    if (json_array_size(list) > PARAMS_NAMES_MOST) {
        char pointer[FAULT_FIELD_BYTES];
        pointer_to_member(pointer, sizeof pointer, "", member);
        return fault_set(fault, FAULT_LIMIT, pointer, "%s holds more than %d names.", member,
                         PARAMS_NAMES_MOST);
    }
    for (size_t i = 0; i < json_array_size(list); i++) {
        const char *wrong = wrong_with_name(json_array_get(list, i));
        if (wrong) {
            char base[FAULT_FIELD_BYTES];
            char pointer[FAULT_FIELD_BYTES];
            pointer_to_member(base, sizeof base, "", member);
            pointer_to_element(pointer, sizeof pointer, base, i);
            return fault_set(fault, FAULT_PARAMS, pointer, "Each of %s %s", member, wrong);
        }
    }
    return 0;
}

int params_names(const json_t *params, const char *member, struct params_names *ret_names,
                 struct fault *fault)
{
    json_t *list = json_object_get(params, member);
    struct params_names names = {0};
    if (list && check_names(list, member, fault) < 0) {
        return fault->code;
    }
    size_t given = json_array_size(list);
    if (given > 0) {
        names.names = calloc(given, sizeof *names.names);
        names.given_at = calloc(given, sizeof *names.given_at);
        if (!names.names || !names.given_at) {
            params_names_deinit(&names);
            return fault_set(fault, FAULT_INTERNAL, NULL, "There is no memory for %s.", member);
        }
        for (size_t i = 0; i < given; i++) {
            names.given_at[i] = i;
        }
        qsort_r(names.given_at, given, sizeof *names.given_at, compare_places, list);
    }
    for (size_t i = 0; i < given; i++) {
        struct store_text name = text_of(json_array_get(list, names.given_at[i]));
        if (names.count == 0 || compare_texts(names.names[names.count - 1], name) != 0) {
            names.given_at[names.count] = names.given_at[i];
            names.names[names.count++] = name;
        }
    }
    *ret_names = names;
    return 0;
}

static int compare_names(const void *left, const void *right)
{
    return compare_texts(*(const struct store_text *)left, *(const struct store_text *)right);
}

bool params_names_hold(const struct params_names *names, struct store_text name)
{
    return names->count > 0 &&
           bsearch(&name, names->names, names->count, sizeof name, compare_names) != NULL;
}

/* --- texts --------------------------------------------------------------------------------------
 */

int params_text(const json_t *params, const char *member, size_t limit, const char *limit_name,
                struct store_text *ret_text, struct fault *fault)
{
    const json_t *value = json_object_get(params, member);
    if (!value) {
        *ret_text = (struct store_text){.data = ""};
        return 0;
    }
    if (!json_is_string(value)) {
        return refuse(fault, member, "is a string.");
    }
    if (json_string_length(value) > limit) {
        char pointer[FAULT_FIELD_BYTES];
        pointer_to_member(pointer, sizeof pointer, "", member);
        return fault_set(fault, FAULT_LIMIT, pointer, "%s is longer than %s, which is %zu bytes.",
                         member, limit_name, limit);
    }
    *ret_text = text_of(value);
    return 0;
}

int params_language(const json_t *params, const char *member, struct store_text *ret_language,
                    struct fault *fault)
{
    static const char LETTERS[] = "abcdefghijklmnopqrstuvwxyzABCDEFGHIJKLMNOPQRSTUVWXYZ0123456789-";
    const json_t *value = json_object_get(params, member);
    if (!value) {
        *ret_language = (struct store_text){.data = ""};
        return 0;
    }
    const char *text = json_string_value(value);
    size_t bytes = json_string_length(value);
    if (!text || bytes < 1 || bytes > PARAMS_LANGUAGE_BYTES || strspn(text, LETTERS) != bytes) {
        return refuse(fault, member, "is a language's code such as \"en\" or \"de-CH\".");
    }
    *ret_language = text_of(value);
    return 0;
}

int params_time(const json_t *params, const char *member, char *text, struct fault *fault)
{
    const json_t *value = json_object_get(params, member);
    int64_t ms = 0;
    if (!value) {
        text[0] = '\0';
        return 0;
    }
    if (!json_is_string(value) || !times_parse(json_string_value(value), &ms)) {
        return refuse(fault, member, "is a time of RFC 3339 such as \"1911-03-09T18:30:00Z\".");
    }
    times_format(ms, text);
    return 0;
}

/* --- numbers and choices ------------------------------------------------------------------------
 */

int params_whole(const json_t *params, const char *member, uint64_t minimum, uint64_t maximum,
                 uint64_t *ret_value, struct fault *fault)
{
    const json_t *value = json_object_get(params, member);
    if (!value) {
        return 0;
    }
    json_int_t number = json_integer_value(value);
    if (!json_is_integer(value) || number < 0 || (uint64_t)number < minimum ||
        (uint64_t)number > maximum) {
        char sentence[96];
        (void)snprintf(sentence, sizeof sentence, "is a whole number from %llu to %llu.",
                       (unsigned long long)minimum, (unsigned long long)maximum);
        return refuse(fault, member, sentence);
    }
    *ret_value = (uint64_t)number;
    return 0;
}

int params_share(const json_t *params, const char *member, double *ret_value, struct fault *fault)
{
    const json_t *value = json_object_get(params, member);
    if (!value) {
        return 0;
    }
    double number = json_number_value(value);
    if (!json_is_number(value) || number < 0.0 || number > 1.0) {
        return refuse(fault, member, "is a number from 0 to 1.");
    }
    *ret_value = number;
    return 0;
}

int params_flag(const json_t *params, const char *member, bool *ret_value, struct fault *fault)
{
    const json_t *value = json_object_get(params, member);
    if (!value) {
        return 0;
    }
    if (!json_is_boolean(value)) {
        return refuse(fault, member, "is true or false.");
    }
    *ret_value = json_is_true(value);
    return 0;
}

int params_choice(const json_t *params, const char *member, const char *const *choices,
                  size_t *ret_choice, struct fault *fault)
{
    const json_t *value = json_object_get(params, member);
    if (!value) {
        return 0;
    }
    char sentence[160] = "is one of";
    size_t used = strlen(sentence);
    for (size_t i = 0; choices[i]; i++) {
        if (json_is_string(value) && strcmp(json_string_value(value), choices[i]) == 0) {
            *ret_choice = i;
            return 0;
        }
        int written = snprintf(sentence + used, sizeof sentence - used, "%s \"%s\"",
                               i > 0 ? "," : "", choices[i]);
        used += written > 0 && (size_t)written < sizeof sentence - used ? (size_t)written : 0;
    }
    (void)snprintf(sentence + used, sizeof sentence - used, ".");
    return refuse(fault, member, sentence);
}
