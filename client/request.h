/*
 * request: params put together from what the command line gave. Each leaves out what was not given,
 * and returns 0 or a failure's code. Texts of options are UTF-8 already (see args.h).
 */
#ifndef UNDERTAG_CLIENT_REQUEST_H
#define UNDERTAG_CLIENT_REQUEST_H

#include <jansson.h>

#include "client/args.h"
#include "client/failure.h"

/* {"NAME": WORD}; `what` names the word in a sentence ("the ID"). */
int request_new(const char *name, const char *word, const char *what, json_t **ret_params,
                struct failure *failure) __attribute__((warn_unused_result));

int request_text(json_t *params, const char *name, const struct args_value *value,
                 struct failure *failure) __attribute__((warn_unused_result));
int request_whole(json_t *params, const char *name, const struct args_value *value,
                  struct failure *failure) __attribute__((warn_unused_result));
int request_number(json_t *params, const char *name, const struct args_value *value,
                   struct failure *failure) __attribute__((warn_unused_result));

/* A list even where nothing was given: then it is empty. */
int request_list(json_t *params, const char *name, const struct args_value *value,
                 struct failure *failure) __attribute__((warn_unused_result));

#endif
