#include "daemon/command_line.h"

#include <getopt.h>
#include <stdio.h>
#include <stdlib.h>
#include <sysexits.h>
#include <unistd.h>

const char COMMAND_LINE_HELP[] =
    "undertagd - learns how a desk tags, and proposes the tags that its items lack\n"
    "\n"
    "usage: undertagd [option]...\n"
    "\n"
    "  --home DIR         where items and model are kept (default:\n"
    "                     $XDG_STATE_HOME/undertag, ~/.local/state/undertag, or\n"
    "                     /var/lib/undertag for root)\n"
    "  --socket PATH      where to listen (default:\n"
    "                     $XDG_RUNTIME_DIR/undertag/socket, or\n"
    "                     /run/undertag/socket)\n"
    "  --config FILE      options, one 'name = value' a line\n"
    "  --set NAME=VALUE   one option, over what the file says; may be repeated\n"
    "  --check-config     say whether the options are right, and end\n"
    "  --verify           look through the home for damage, change nothing, and end\n"
    "  --restore FOLDER   make a home of a backup, and end; the home must be empty or\n"
    "                     not there\n"
    "  --version          print the version, and end\n"
    "  --help             print this, and end\n"
    "\n"
    "It stays in the foreground and logs to standard error. SIGTERM and SIGINT end it\n"
    "once what is under way has been answered; SIGHUP has it read its options again.\n";

enum {
    OPTION_HOME = 1,
    OPTION_SOCKET,
    OPTION_CONFIG,
    OPTION_SET,
    OPTION_CHECK,
    OPTION_VERIFY,
    OPTION_RESTORE,
    OPTION_VERSION,
    OPTION_HELP
};

static const struct option LONG_OPTIONS[] = {
    {"home", required_argument, NULL, OPTION_HOME},
    {"socket", required_argument, NULL, OPTION_SOCKET},
    {"config", required_argument, NULL, OPTION_CONFIG},
    {"set", required_argument, NULL, OPTION_SET},
    {"check-config", no_argument, NULL, OPTION_CHECK},
    {"verify", no_argument, NULL, OPTION_VERIFY},
    {"restore", required_argument, NULL, OPTION_RESTORE},
    {"version", no_argument, NULL, OPTION_VERSION},
    {"help", no_argument, NULL, OPTION_HELP},
    {NULL, 0, NULL, 0},
};

static int fail(char *error, const char *what, const char *wrong)
{
    (void)snprintf(error, COMMAND_LINE_ERROR_BYTES, "%.200s %s; see undertagd --help", what, wrong);
    return EX_USAGE;
}

/* Copies a path; false where it is too long. */
static bool set_path(char path[COMMAND_LINE_PATH_BYTES], const char *start, const char *end)
{
    int written = snprintf(path, COMMAND_LINE_PATH_BYTES, "%s%s", start, end);
    return written > 0 && written < COMMAND_LINE_PATH_BYTES;
}

/* getopt is still within a word of several letters, so argv would name the word before it. */
static int fail_unknown(char *error, char **argv)
{
    const char letter[] = {'-', (char)optopt, '\0'};
    bool is_letter = optopt > ' ' && optopt < 0x7F; /* 0 or one of ours for a long option */
    return fail(error, is_letter ? letter : argv[optind - 1], "is no option");
}

static int take_option(struct command_line *line, int option, char **argv, char *error)
{
    switch (option) {
    case OPTION_HOME:
        return set_path(line->home, optarg, "") ? 0 : fail(error, "--home", "takes a path");
    case OPTION_SOCKET:
        return set_path(line->socket, optarg, "") ? 0 : fail(error, "--socket", "takes a path");
    case OPTION_CONFIG:
        line->config = optarg;
        return 0;
    case OPTION_SET:
        line->settings[line->setting_count++] = optarg;
        return 0;
    case OPTION_CHECK:
        line->check_config = true;
        return 0;
    case OPTION_VERIFY:
        line->verify = true;
        return 0;
    case OPTION_RESTORE:
        line->restore = optarg;
        return *optarg ? 0 : fail(error, "--restore", "takes a path");
    case OPTION_VERSION:
        line->version = true;
        return 0;
    case OPTION_HELP:
        line->help = true;
        return 0;
    case ':':
        return fail(error, argv[optind - 1], "takes a value");
    default:
        return fail_unknown(error, argv);
    }
}

static const char *environment(const char *name)
{
    const char *value = getenv(name);
    return value && *value ? value : NULL;
}

static bool default_home(struct command_line *line)
{
    const char *state = environment("XDG_STATE_HOME");
    const char *person = environment("HOME");
    if (state) {
        return set_path(line->home, state, "/undertag");
    }
    if (person && getuid() != 0) {
        return set_path(line->home, person, "/.local/state/undertag");
    }
    return set_path(line->home, "/var/lib/undertag", "");
}

static bool default_socket(struct command_line *line)
{
    const char *runtime = environment("XDG_RUNTIME_DIR");
    line->socket_is_default = true;
    return set_path(line->socket, runtime ? runtime : "/run", "/undertag/socket");
}

int command_line_read(int argc, char **argv, struct command_line *ret_line, char *error)
{
    struct command_line line = {0};
    line.settings = calloc((size_t)argc + 1, sizeof *line.settings);
    if (!line.settings) {
        (void)snprintf(error, COMMAND_LINE_ERROR_BYTES, "there is no memory");
        return EX_OSERR;
    }
    int code = 0;
    int option = 0;
    opterr = 0;
    while (code == 0 && (option = getopt_long(argc, argv, ":", LONG_OPTIONS, NULL)) != -1) {
        code = take_option(&line, option, argv, error);
    }
    if (code == 0 && optind < argc) {
        code = fail(error, argv[optind], "is no option");
    }
    if (code == 0 &&
        ((!line.home[0] && !default_home(&line)) || (!line.socket[0] && !default_socket(&line)))) {
        code = fail(error, "a path from the environment", "is too long");
    }
    if (code != 0) {
        command_line_deinit(&line);
        return code;
    }
    *ret_line = line;
    return 0;
}

void command_line_deinit(struct command_line *line)
{
    free(line->settings);
    line->settings = NULL;
}

int command_line_options(const struct command_line *line, struct options *ret_options, char *error)
{
    struct options options;
    options_defaults(&options);
    if (line->config && options_read_file(&options, line->config, error) < 0) {
        return EX_CONFIG;
    }
    for (size_t i = 0; i < line->setting_count; i++) {
        if (options_set_pair(&options, line->settings[i], error) < 0) {
            return EX_CONFIG;
        }
    }
    *ret_options = options;
    return 0;
}
