/*
 * The shapes of the desk's answers: what the commands and the report rely on, no more.
 */
#include "client/reply.h"

const struct reply_member REPLY_RULED[] = {{"seq", REPLY_NUMBER, false, NULL}, {0}};

const struct reply_member REPLY_CHECKED[] = {{"seq", REPLY_NUMBER, false, NULL},
                                             {"missed", REPLY_TEXTS, false, NULL},
                                             {"extra", REPLY_TEXTS, false, NULL},
                                             {0}};

const struct reply_member REPLY_SAMPLE[] = {{"items", REPLY_TEXTS, false, NULL}, {0}};

/* --- the worklist --------------------------------------------------------------------------- */

static const struct reply_member GAP[] = {
    {"tag", REPLY_TEXT, false, NULL}, {"chance", REPLY_NUMBER, false, NULL}, {0}};

static const struct reply_member ENTRY[] = {
    {"id", REPLY_TEXT, false, NULL},        {"title", REPLY_TEXT, true, NULL},
    {"gaps", REPLY_OBJECTS, false, GAP},    {"expected", REPLY_NUMBER, false, NULL},
    {"running", REPLY_NUMBER, false, NULL}, {0}};

const struct reply_member REPLY_WORKLIST[] = {{"items", REPLY_OBJECTS, false, ENTRY},
                                              {"next", REPLY_TEXT, true, NULL},
                                              {"learned", REPLY_NUMBER, true, NULL},
                                              {"kept", REPLY_NUMBER, true, NULL},
                                              {0}};

/* --- completeness --------------------------------------------------------------------------- */

#define ESTIMATE                                                                                   \
    {"share", REPLY_NUMBER, true, NULL}, {"low", REPLY_NUMBER, true, NULL},                        \
        {"high", REPLY_NUMBER, true, NULL}, {"given", REPLY_NUMBER, false, NULL},                  \
        {"missing", REPLY_NUMBER, false, NULL},                                                    \
    {                                                                                              \
        "from", REPLY_TEXT, false, NULL                                                            \
    }

static const struct reply_member X[] = {ESTIMATE, {0}};

static const struct reply_member TAG_X[] = {{"tag", REPLY_TEXT, false, NULL}, ESTIMATE, {0}};

static const struct reply_member BANDS_X[] = {{"head", REPLY_OBJECT, false, X},
                                              {"torso", REPLY_OBJECT, false, X},
                                              {"tail", REPLY_OBJECT, false, X},
                                              {0}};

static const struct reply_member CHECKS[] = {
    {"random", REPLY_NUMBER, false, NULL}, {"picked", REPLY_NUMBER, false, NULL}, {0}};

static const struct reply_member WRONG[] = {
    {"share", REPLY_NUMBER, true, NULL}, {"low", REPLY_NUMBER, true, NULL},
    {"high", REPLY_NUMBER, true, NULL},  {"wrong", REPLY_NUMBER, false, NULL},
    {"seen", REPLY_NUMBER, false, NULL}, {0}};

static const struct reply_member CHAPMAN[] = {{"true", REPLY_NUMBER, true, NULL},
                                              {"low", REPLY_NUMBER, true, NULL},
                                              {"high", REPLY_NUMBER, true, NULL},
                                              {0}};

static const struct reply_member SECOND[] = {{"items", REPLY_NUMBER, false, NULL},
                                             {"first", REPLY_NUMBER, false, NULL},
                                             {"second", REPLY_NUMBER, false, NULL},
                                             {"both", REPLY_NUMBER, false, NULL},
                                             {"chapman", REPLY_OBJECT, true, CHAPMAN},
                                             {"found_share", REPLY_NUMBER, true, NULL},
                                             {"rolling", REPLY_NUMBER, true, NULL},
                                             {"hooper", REPLY_NUMBER, true, NULL},
                                             {0}};

static const struct reply_member CURVE[] = {{"a", REPLY_NUMBER, false, NULL},
                                            {"b", REPLY_NUMBER, false, NULL},
                                            {"fitted", REPLY_TRUTH, false, NULL},
                                            {"trials", REPLY_NUMBER, false, NULL},
                                            {0}};

const struct reply_member REPLY_COMPLETENESS[] = {
    {"overall", REPLY_OBJECT, false, X},   {"bands", REPLY_OBJECT, false, BANDS_X},
    {"tags", REPLY_OBJECTS, false, TAG_X}, {"checks", REPLY_OBJECT, false, CHECKS},
    {"wrong", REPLY_OBJECT, true, WRONG},  {"second", REPLY_OBJECT, true, SECOND},
    {"curve", REPLY_OBJECT, true, CURVE},  {0}};

/* --- standing ------------------------------------------------------------------------------- */

static const struct reply_member FIGURES[] = {{"with", REPLY_OBJECT, false, NULL},
                                              {"without", REPLY_OBJECT, true, NULL},
                                              {"gain", REPLY_OBJECT, true, NULL},
                                              {0}};

static const struct reply_member BANDS_FIGURES[] = {{"all", REPLY_OBJECT, false, FIGURES},
                                                    {"head", REPLY_OBJECT, true, FIGURES},
                                                    {"torso", REPLY_OBJECT, true, FIGURES},
                                                    {"tail", REPLY_OBJECT, true, FIGURES},
                                                    {0}};

static const struct reply_member BIN[] = {
    {"from", REPLY_NUMBER, false, NULL},      {"to", REPLY_NUMBER, false, NULL},
    {"shown", REPLY_NUMBER, false, NULL},     {"mean_chance", REPLY_NUMBER, true, NULL},
    {"confirmed", REPLY_NUMBER, false, NULL}, {0}};

static const struct reply_member PERIOD[] = {{"items", REPLY_NUMBER, false, NULL},
                                             {"with", REPLY_OBJECT, false, NULL},
                                             {"without", REPLY_OBJECT, true, NULL},
                                             {0}};

const struct reply_member REPLY_STANDING[] = {{"items", REPLY_NUMBER, false, NULL},
                                              {"bands", REPLY_OBJECT, false, BANDS_FIGURES},
                                              {"reliability", REPLY_OBJECTS, false, BIN},
                                              {"history", REPLY_OBJECTS, true, PERIOD},
                                              {0}};

/* --- what stood before the desk ------------------------------------------------------------- */

const struct reply_member REPLY_STATE[] = {
    {"version", REPLY_TEXT, false, NULL},   {"items", REPLY_NUMBER, false, NULL},
    {"tags", REPLY_NUMBER, false, NULL},    {"seq", REPLY_NUMBER, false, NULL},
    {"learned", REPLY_NUMBER, false, NULL}, {0}};

static const struct reply_member TAG[] = {{"tag", REPLY_TEXT, false, NULL},
                                          {"count", REPLY_NUMBER, false, NULL},
                                          {"p", REPLY_NUMBER, false, NULL},
                                          {"state", REPLY_TEXT, false, NULL},
                                          {0}};

const struct reply_member REPLY_TAGS[] = {{"tags", REPLY_OBJECTS, false, TAG}, {0}};
