#include "daemon/tag_json.h"

#include "daemon/answer.h"

const char *tag_state_name(enum vocabulary_state state)
{
    return state == VOCABULARY_RETIRED ? "retired" : "open";
}

json_t *tag_json(const struct outlook *outlook, const struct vocabulary_tag *tag)
{
    struct propensity_of_tag propensity = outlook_propensity(outlook, &tag->counts);
    double missing = outlook_missing(outlook, &tag->counts);
    json_t *result = json_object();
    answer_add(&result, "tag", json_string(tag->name));
    answer_add(&result, "count", answer_count(tag->counts.count));
    answer_add(&result, "unprompted", answer_count(tag->counts.unprompted));
    answer_add(&result, "propensity",
               json_pack("{s:f, s:f, s:f, s:s}", "p", propensity.p, "low", propensity.low, "high",
                         propensity.high, "from", outlook_from(propensity.from)));
    answer_add(&result, "expected_true", answer_number((double)tag->counts.count + missing));
    answer_add(&result, "missing", answer_number(missing));
    answer_add(&result, "opened_seq", answer_count(tag->opened_seq));
    answer_add(&result, "state", json_string(tag_state_name(tag->state)));
    answer_add(&result, "label", json_null());
    answer_add(&result, "broader", json_null());
    answer_add(&result, "aliases", json_array());
    answer_add(&result, "rulings",
               json_pack("{s:o, s:o}", "belongs", answer_count(tag->counts.ruled_belongs), "not",
                         answer_count(tag->counts.ruled_not)));
    return result;
}

json_t *tag_curve_json(const struct propensity_fit *fit)
{
    return json_pack("{s:f, s:f, s:b, s:f}", "a", fit->a, "b", fit->b, "fitted",
                     fit->trials > 0.0 ? 1 : 0, "trials", fit->trials);
}
