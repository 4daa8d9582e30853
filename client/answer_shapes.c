/*
 * The shapes of the desk's answers: what the commands and the report rely on, no more.
 */
#include "client/answer.h"

const struct answer_member ANSWER_RULED[] = {{"seq", ANSWER_NUMBER, false, NULL}, {0}};

const struct answer_member ANSWER_CHECKED[] = {{"seq", ANSWER_NUMBER, false, NULL},
                                               {"missed", ANSWER_TEXTS, false, NULL},
                                               {"extra", ANSWER_TEXTS, false, NULL},
                                               {0}};

const struct answer_member ANSWER_SAMPLE[] = {{"items", ANSWER_TEXTS, false, NULL}, {0}};

/* --- the worklist --------------------------------------------------------------------------- */

static const struct answer_member GAP[] = {
    {"tag", ANSWER_TEXT, false, NULL}, {"chance", ANSWER_NUMBER, false, NULL}, {0}};

static const struct answer_member ENTRY[] = {
    {"id", ANSWER_TEXT, false, NULL},        {"title", ANSWER_TEXT, true, NULL},
    {"gaps", ANSWER_OBJECTS, false, GAP},    {"expected", ANSWER_NUMBER, false, NULL},
    {"running", ANSWER_NUMBER, false, NULL}, {0}};

const struct answer_member ANSWER_WORKLIST[] = {{"items", ANSWER_OBJECTS, false, ENTRY},
                                                {"next", ANSWER_TEXT, true, NULL},
                                                {"learned", ANSWER_NUMBER, true, NULL},
                                                {"kept", ANSWER_NUMBER, true, NULL},
                                                {0}};

/* --- completeness --------------------------------------------------------------------------- */

#define ESTIMATE                                                                                   \
    {"share", ANSWER_NUMBER, true, NULL}, {"low", ANSWER_NUMBER, true, NULL},                      \
        {"high", ANSWER_NUMBER, true, NULL}, {"given", ANSWER_NUMBER, false, NULL},                \
        {"missing", ANSWER_NUMBER, false, NULL},                                                   \
    {                                                                                              \
        "from", ANSWER_TEXT, false, NULL                                                           \
    }

static const struct answer_member X[] = {ESTIMATE, {0}};

static const struct answer_member TAG_X[] = {{"tag", ANSWER_TEXT, false, NULL}, ESTIMATE, {0}};

static const struct answer_member BANDS_X[] = {{"head", ANSWER_OBJECT, false, X},
                                               {"torso", ANSWER_OBJECT, false, X},
                                               {"tail", ANSWER_OBJECT, false, X},
                                               {0}};

static const struct answer_member CHECKS[] = {
    {"random", ANSWER_NUMBER, false, NULL}, {"picked", ANSWER_NUMBER, false, NULL}, {0}};

static const struct answer_member WRONG[] = {
    {"share", ANSWER_NUMBER, true, NULL}, {"low", ANSWER_NUMBER, true, NULL},
    {"high", ANSWER_NUMBER, true, NULL},  {"wrong", ANSWER_NUMBER, false, NULL},
    {"seen", ANSWER_NUMBER, false, NULL}, {0}};

static const struct answer_member CHAPMAN[] = {{"true", ANSWER_NUMBER, false, NULL},
                                               {"low", ANSWER_NUMBER, true, NULL},
                                               {"high", ANSWER_NUMBER, true, NULL},
                                               {0}};

static const struct answer_member SECOND[] = {{"items", ANSWER_NUMBER, false, NULL},
                                              {"first", ANSWER_NUMBER, false, NULL},
                                              {"second", ANSWER_NUMBER, false, NULL},
                                              {"both", ANSWER_NUMBER, false, NULL},
                                              {"chapman", ANSWER_OBJECT, true, CHAPMAN},
                                              {"found_share", ANSWER_NUMBER, true, NULL},
                                              {"rolling", ANSWER_NUMBER, true, NULL},
                                              {"hooper", ANSWER_NUMBER, true, NULL},
                                              {0}};

static const struct answer_member CURVE[] = {{"a", ANSWER_NUMBER, false, NULL},
                                             {"b", ANSWER_NUMBER, false, NULL},
                                             {"fitted", ANSWER_TRUTH, false, NULL},
                                             {"trials", ANSWER_NUMBER, false, NULL},
                                             {0}};

const struct answer_member ANSWER_COMPLETENESS[] = {
    {"overall", ANSWER_OBJECT, false, X},   {"bands", ANSWER_OBJECT, false, BANDS_X},
    {"tags", ANSWER_OBJECTS, false, TAG_X}, {"checks", ANSWER_OBJECT, false, CHECKS},
    {"wrong", ANSWER_OBJECT, true, WRONG},  {"second", ANSWER_OBJECT, true, SECOND},
    {"curve", ANSWER_OBJECT, true, CURVE},  {0}};

/* --- standing ------------------------------------------------------------------------------- */

static const struct answer_member FIGURES[] = {{"with", ANSWER_OBJECT, false, NULL},
                                               {"without", ANSWER_OBJECT, true, NULL},
                                               {"gain", ANSWER_OBJECT, true, NULL},
                                               {0}};

static const struct answer_member BANDS_FIGURES[] = {{"all", ANSWER_OBJECT, false, FIGURES},
                                                     {"head", ANSWER_OBJECT, true, FIGURES},
                                                     {"torso", ANSWER_OBJECT, true, FIGURES},
                                                     {"tail", ANSWER_OBJECT, true, FIGURES},
                                                     {0}};

static const struct answer_member BIN[] = {
    {"from", ANSWER_NUMBER, false, NULL},      {"to", ANSWER_NUMBER, false, NULL},
    {"shown", ANSWER_NUMBER, false, NULL},     {"mean_chance", ANSWER_NUMBER, true, NULL},
    {"confirmed", ANSWER_NUMBER, false, NULL}, {0}};

static const struct answer_member PERIOD[] = {{"items", ANSWER_NUMBER, false, NULL},
                                              {"with", ANSWER_OBJECT, false, NULL},
                                              {"without", ANSWER_OBJECT, true, NULL},
                                              {0}};

const struct answer_member ANSWER_STANDING[] = {{"items", ANSWER_NUMBER, false, NULL},
                                                {"bands", ANSWER_OBJECT, false, BANDS_FIGURES},
                                                {"reliability", ANSWER_OBJECTS, false, BIN},
                                                {"history", ANSWER_OBJECTS, true, PERIOD},
                                                {0}};

/* --- what stood before the desk ------------------------------------------------------------- */

const struct answer_member ANSWER_STATE[] = {
    {"version", ANSWER_TEXT, false, NULL},   {"items", ANSWER_NUMBER, false, NULL},
    {"tags", ANSWER_NUMBER, false, NULL},    {"seq", ANSWER_NUMBER, false, NULL},
    {"learned", ANSWER_NUMBER, false, NULL}, {0}};

static const struct answer_member TAG[] = {{"tag", ANSWER_TEXT, false, NULL},
                                           {"count", ANSWER_NUMBER, false, NULL},
                                           {"p", ANSWER_NUMBER, false, NULL},
                                           {"state", ANSWER_TEXT, false, NULL},
                                           {0}};

const struct answer_member ANSWER_TAGS[] = {{"tags", ANSWER_OBJECTS, false, TAG}, {0}};
