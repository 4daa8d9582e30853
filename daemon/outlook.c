#include "daemon/outlook.h"

static const double SECOND_WEIGHT = 0.5;

void outlook_of_model(const struct model *model, uint64_t items, uint64_t learned,
                      struct outlook *ret_outlook)
{
    *ret_outlook = (struct outlook){.fit = *model_fit(model),
                                    .documents = (double)items,
                                    .growth = propensity_growth((double)items),
                                    .learned = learned};
}

struct reading {
    uint64_t items;
    struct outlook *outlook;
};

static void read_outlook(void *user, const struct model *model, const struct base *base,
                         uint64_t learned)
{
    (void)base;
    const struct reading *reading = user;
    outlook_of_model(model, reading->items, learned, reading->outlook);
}

int outlook_begin(struct engine *engine, uint64_t items, struct outlook *ret_outlook)
{
    struct reading reading = {.items = items, .outlook = ret_outlook};
    return engine_read_model(engine, read_outlook, &reading);
}

struct completeness_tag outlook_of_tag(const struct vocabulary_counts *counts)
{
    return (struct completeness_tag){
        .count = (double)counts->count,
        .unprompted_open = (double)counts->unchecked,
        .found = (double)counts->found,
        .tag_count = (double)counts->unprompted,
        .trials = (double)counts->check_true + SECOND_WEIGHT * (double)counts->second_true,
        .given = (double)counts->check_given + SECOND_WEIGHT * (double)counts->second_given};
}

struct propensity_of_tag outlook_propensity(const struct outlook *outlook,
                                            const struct vocabulary_counts *counts)
{
    struct completeness_tag tag = outlook_of_tag(counts);
    return propensity_fit_tag(&outlook->fit, tag.tag_count, outlook->documents, tag.trials,
                              tag.given);
}

double outlook_propensity_mean(const struct outlook *outlook,
                               const struct vocabulary_counts *counts)
{
    struct completeness_tag tag = outlook_of_tag(counts);
    return propensity_fit_tag_mean_at(&outlook->fit, tag.tag_count, outlook->growth, tag.trials,
                                      tag.given);
}

double outlook_missing(const struct outlook *outlook, const struct vocabulary_counts *counts)
{
    struct completeness_tag tag = outlook_of_tag(counts);
    return completeness_missing_at(&outlook->fit, &tag, outlook->growth);
}

const char *outlook_from(enum propensity_from from)
{
    static const char *const NAMES[] = {[PROPENSITY_FROM_CURVE] = "curve",
                                        [PROPENSITY_FROM_CHECKS] = "checks",
                                        [PROPENSITY_FROM_BOTH] = "both"};
    return NAMES[from];
}
