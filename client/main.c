/*
 * undertag: asks a running undertagd. Options, the table of commands, and how it ends.
 */
#include <jansson.h>
#include <signal.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <unistd.h>

#include "client/args.h"
#include "client/command.h"
#include "client/failure.h"
#include "client/json_memory.h"
#include "client/text.h"

static const struct command *const COMMANDS[] = {
    &command_file,           &command_gaps,          &command_show,     &command_withdraw,
    &command_list,           &command_rule,          &command_check,    &command_sample,
    &command_worklist,       &command_completeness,  &command_standing, &command_report,
    &command_tags_list,      &command_tags_show,     &command_state,    &command_rebuild,
    &command_snapshot_write, &command_snapshot_list, &command_backup,
};

enum {
    COMMAND_COUNT = sizeof COMMANDS / sizeof COMMANDS[0],
    HELP_COLUMNS = 78,
    NAME_BYTES = 64,
    FAMILY_BYTES = 256,
    PATH_BYTES = 4096
};

enum {
    SOCKET,
    JSON,
    HELP,
    VERSION,
    GLOBAL_COUNT
};

static const struct args_option GLOBALS[GLOBAL_COUNT] = {
    [SOCKET] = {"socket", ARGS_PATH, "PATH", 0, 0,
                "the daemon's socket (default $UNDERTAG_SOCKET, or "
                "$XDG_RUNTIME_DIR/undertag/socket if it exists, or /run/undertag/socket)"},
    [JSON] = {"json", ARGS_FLAG, NULL, 0, 0, "print the daemon's answer, one JSON text a line"},
    [HELP] = {"help", ARGS_FLAG, NULL, 0, 0, "print this help"},
    [VERSION] = {"version", ARGS_FLAG, NULL, 0, 0, "print the version"},
};

/* --- help ----------------------------------------------------------------------------------- */

static void print_wrapped(const char *text)
{
    while (*text) {
        size_t next = 0;
        size_t length = text_line(text, HELP_COLUMNS, &next);
        (void)printf("%.*s\n", (int)length, text); /* errors are seen at the end */
        text += next;
    }
}

static void print_exit_codes(void)
{
    (void)printf("\nExit codes:\n   0  done\n");
#define PRINT_CODE(name, exit_code, sentence) (void)printf("  %2d  %s\n", exit_code, sentence);
    FAILURE_CODES(PRINT_CODE)
#undef PRINT_CODE
}

static void print_help(void)
{
    (void)printf("Usage: undertag [--socket PATH] [--json] COMMAND ...\n\n"
                 "Asks a running undertagd which tags items lack, and files items with it.\n\n"
                 "Commands ('undertag COMMAND --help' for each):\n");
    for (size_t i = 0; i < COMMAND_COUNT; i++) {
        (void)printf("  %-14s %s\n", COMMANDS[i]->name, COMMANDS[i]->summary);
    }
    (void)printf("\nOptions, before or after the command:\n");
    args_help(GLOBALS, GLOBAL_COUNT, stdout);
    print_exit_codes();
}

static void print_command_help(const struct command *command)
{
    (void)printf("Usage: undertag %s%s%s%s\n\n", command->name,
                 command->option_count > 0 ? " [OPTION...]" : "", *command->synopsis ? " " : "",
                 command->synopsis);
    (void)printf("%s: %s.\n", command->name, command->summary);
    if (*command->about) {
        (void)printf("\n");
        print_wrapped(command->about);
    }
    if (command->option_count > 0) {
        (void)printf("\nOptions:\n");
        args_help(command->options, command->option_count, stdout);
    }
    (void)printf("\nOptions of every command:\n");
    args_help(GLOBALS, GLOBAL_COUNT, stdout);
}

/* --- the command line ----------------------------------------------------------------------- */

/* What the command line asks for. */
struct request {
    struct args globals;
    struct args own;
    const struct command *command; /* NULL while none is named */
};

/* True if `word` is the first of a command's two words. */
static bool is_family(const char *word)
{
    size_t length = strlen(word);
    for (size_t i = 0; i < COMMAND_COUNT; i++) {
        const char *name = COMMANDS[i]->name;
        if (strncmp(name, word, length) == 0 && name[length] == ' ') {
            return true;
        }
    }
    return false;
}

static const struct command *find_command(const char *name)
{
    for (size_t i = 0; i < COMMAND_COUNT; i++) {
        if (strcmp(COMMANDS[i]->name, name) == 0) {
            return COMMANDS[i];
        }
    }
    return NULL;
}

static int fail_command(const char *name, struct failure *failure)
{
    const char *near = NULL;
    char commands[FAMILY_BYTES] = ""; /* of the family, where only that is given */
    size_t length = strlen(name);
    for (size_t i = 0; i < COMMAND_COUNT; i++) {
        const char *known = COMMANDS[i]->name;
        size_t used = strlen(commands);
        near = args_is_near(name, known) ? known : near;
        if (strncmp(known, name, length) == 0 && known[length] == ' ') {
            (void)snprintf(commands + used, sizeof commands - used, "%s'%s'", used ? ", " : "",
                           known); /* the table is short */
        }
    }
    if (*commands) {
        return failure_set(failure, FAILURE_USAGE, "'%s' alone is no command; there are %s", name,
                           commands);
    }
    if (near) {
        return failure_set(failure, FAILURE_USAGE,
                           "there is no command '%s' (is '%s' meant?); see 'undertag --help'", name,
                           near);
    }
    return failure_set(failure, FAILURE_USAGE, "there is no command '%s'; see 'undertag --help'",
                       name);
}

/* Reads options up to the command's name, of one word or two, and the name. */
static int read_name(struct request *request, struct args_cursor *cursor, char name[NAME_BYTES],
                     struct failure *failure)
{
    static const char HINT[] = "see 'undertag --help'";
    struct args *levels[] = {&request->globals};
    name[0] = '\0';
    for (int words = 0; words < 2; words++) {
        int code = args_parse(levels, 1, cursor, true, HINT, failure);
        if (code || !*cursor->at) {
            return code;
        }
        const char *word = *cursor->at++;
        size_t length = strlen(name);
        (void)snprintf(name + length, NAME_BYTES - length, words > 0 ? " %s" : "%s", word);
        if (!is_family(word)) {
            break;
        }
    }
    return 0;
}

static int check_words(const struct command *command, const struct args *own,
                       struct failure *failure)
{
    if (own->word_count < command->least_words) {
        return failure_set(failure, FAILURE_USAGE, "%s needs %s; see 'undertag %s --help'",
                           command->name, command->synopsis, command->name);
    }
    if (own->word_count > command->most_words) {
        return failure_set(failure, FAILURE_USAGE,
                           "%s does not take '%s'; see 'undertag %s --help'", command->name,
                           own->words[command->most_words], command->name);
    }
    return 0;
}

static int read_request(struct request *request, char **argv, struct failure *failure)
{
    struct args_cursor cursor = {.at = argv};
    char name[NAME_BYTES];
    char hint[NAME_BYTES + 32];
    if (args_init(&request->globals, GLOBALS, GLOBAL_COUNT)) {
        return failure_memory(failure);
    }
    const struct args_value *globals = request->globals.values;
    int code = read_name(request, &cursor, name, failure);
    if (code || ((globals[HELP].given || globals[VERSION].given) && !*name)) {
        return code;
    }
    if (!*name) {
        return failure_set(failure, FAILURE_USAGE, "no command is given; see 'undertag --help'");
    }
    request->command = find_command(name);
    if (!request->command && is_family(name) && globals[HELP].given) {
        return 0;
    }
    if (!request->command) {
        return fail_command(name, failure);
    }
    if (args_init(&request->own, request->command->options, request->command->option_count)) {
        return failure_memory(failure);
    }
    struct args *levels[] = {&request->globals, &request->own};
    (void)snprintf(hint, sizeof hint, "see 'undertag %s --help'", name);
    code = args_parse(levels, 2, &cursor, false, hint, failure);
    if (!code && !globals[HELP].given && !globals[VERSION].given) {
        code = check_words(request->command, &request->own, failure);
    }
    return code;
}

/* --- running -------------------------------------------------------------------------------- */

/* The socket asked for, or the default one; `path` (PATH_BYTES) is room for it. */
static int choose_socket(const struct args_value *option, char *path, struct failure *failure)
{
    const char *directory = getenv("XDG_RUNTIME_DIR");
    const char *chosen = option->given ? option->text : getenv("UNDERTAG_SOCKET");
    int written = 0;
    if (chosen && (*chosen || option->given)) {
        written = snprintf(path, PATH_BYTES, "%s", chosen);
    } else {
        if (directory && *directory) {
            written = snprintf(path, PATH_BYTES, "%s/undertag/socket", directory);
        }
        if (written <= 0 || written >= PATH_BYTES || access(path, F_OK)) {
            written = snprintf(path, PATH_BYTES, "/run/undertag/socket");
        }
    }
    if (written < 0 || written >= PATH_BYTES) {
        return failure_set(failure, FAILURE_USAGE, "the socket's path is too long");
    }
    return 0;
}

static int run_request(const struct request *request, struct client *client,
                       struct failure *failure)
{
    const struct args_value *globals = request->globals.values;
    char path[PATH_BYTES];
    if (globals[HELP].given) {
        if (request->command) {
            print_command_help(request->command);
        } else {
            print_help();
        }
        return 0;
    }
    if (globals[VERSION].given) {
        (void)printf("undertag %s\n", UNDERTAG_VERSION); /* errors are seen at the end */
        return 0;
    }
    int code = choose_socket(&globals[SOCKET], path, failure);
    if (code) {
        return code;
    }
    client->socket_path = path;
    client->json = globals[JSON].given;
    code = request->command->run(client, &request->own, failure);
    client->socket_path = NULL;
    return code;
}

int main(int argc, char **argv)
{
    struct client client = {0};
    struct request request = {0};
    struct failure failure = {0};
    json_memory_begin();
    json_object_seed(0); /* at random: nobody can choose names that collide */
    screen_init(&client.out, stdout);
    screen_init(&client.err, stderr);
    if (signal(SIGPIPE, SIG_IGN) == SIG_ERR) {
        (void)failure_set(&failure, FAILURE_INTERNAL, "a closed pipe cannot be waited for");
    }
    int code = failure.code;
    if (!code) {
        code = read_request(&request, argc > 0 ? argv + 1 : argv, &failure);
    }
    if (!code) {
        code = run_request(&request, &client, &failure);
    }
    if (!code && json_memory_is_short()) {
        code = failure_memory(&failure); /* what was printed may lack a part */
    }
    struct failure output = {0};
    if (command_flush(&output) && (!code || code == FAILURE_DATA)) {
        code = output.code;
        failure = output;
    }
    if (code && *failure.message) {
        command_complain(&client, "%s", failure.message);
    }
    args_deinit(&request.own);
    args_deinit(&request.globals);
    return -code;
}
