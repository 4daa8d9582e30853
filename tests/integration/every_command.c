#include "tests/integration/every_command.h"

#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>

#include <cmocka.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <sysexits.h>

#include "tests/integration/answers.h"
#include "tests/integration/logbook.h"
#include "tests/integration/peer.h"

#define LINES                                                                                      \
    "\xEF\xBB\xBF{\"id\": \"1911-03-09\", \"text\": \"Dense fog, the bell at two.\", "             \
    "\"tags\": [\"fog\"], \"then\": [{\"method\": \"item.rule\", \"params\": {\"belongs\": "       \
    "[\"lamp\"], \"editor\": \"east\"}}, {\"method\": \"item.check\", \"params\": {\"tags\": "     \
    "[\"fog\", \"lamp\"], \"drawn\": \"picked\"}}]}\n"                                             \
    "\n"                                                                                           \
    "{\"id\": \"1911-03-10\", \"text\": \"The supply boat landed.\", \"tags\": [\"supply\"]}\n"    \
    "{\"id\": \"1911-03-10\", \"text\": \"The supply boat landed.\", \"tags\": [\"supply\"]}"

/* In an order in which each finds what it is about. */
static const struct played_command COMMANDS[] = {
    {LINES, {"file"}},
    {LINES, {"--json", "file", "-"}},
    {"", {"file", "@lines.jsonl"}},
    {"The wick was trimmed.\n",
     {"file",
      "--id",
      "wick",
      "--title",
      "A quiet watch",
      "--tag",
      "lamp",
      "--tag",
      "weather",
      "--language",
      "en",
      "--tagger",
      "keeper-2",
      "--filed-at",
      "2031-05-04T10:00:00Z",
      "--field",
      "station=North Pier",
      "--field",
      "boat=Tern",
      "--field",
      "boat=Auk",
      "--field",
      "boat=Skua",
      NULL}},
    {"", {"file", "--id", "wick", "--tagger", "keeper-3", "--independent", "--tag", "lamp"}},
    {"",
     {"file", "--id", "gale", "--tag", "weather", "--prompted", "weather", "--declined", "fog"}},
    {"", {"rule", "wick", "--belongs", "birds", "--not", "weather", "--editor", "east"}},
    {"",
     {"check", "wick", "--tag", "lamp", "--tag", "supply", "--drawn", "random", "--checker", "w"}},
    {"", {"check", "gale"}},
    {"", {"show", "wick"}},
    {"", {"--json", "show", "gale"}},
    {"", {"gaps", "entry 7", "--why", "--most", "3", "--floor", "0"}},
    {"{\"title\": \"Fog\", \"text\": \"Horn and haze.\", \"tags\": [\"fog\"]}",
     {"gaps", "--floor", "0.01"}},
    {"Oil for the lens.\n", {"gaps"}},
    {"", {"list", "--since", "3", "--most", "4"}},
    {"", {"--json", "list", "--most", "2"}},
    {"", {"sample", "3", "--seed", "11"}},
    {"", {"worklist", "--most", "3", "--floor", "0.01"}},
    {"", {"worklist", "--tag", "fog", "--floor", "0.01", "--most", "2", "--after", "entry 3"}},
    {"", {"--json", "worklist"}},
    {"", {"completeness", "--most", "2", "--how"}},
    {"", {"completeness", "fog"}},
    {"", {"standing", "--window", "0"}},
    {"", {"tags", "list", "--order", "count", "--most", "3"}},
    {"", {"tags", "list", "--after", "fog"}},
    {"", {"--json", "tags", "list", "--most", "1"}},
    {"", {"tags", "show", "fog"}},
    {"", {"state"}},
    {"", {"--json", "state"}},
    {"", {"report", "@page.html"}},
    {"", {"--json", "report", "@page.html"}},
    {"", {"snapshot", "list"}},
    {"",
     {"snapshot", "write", "--name", "spring", "--items", "--no-proposals", "--floor", "0.3",
      "--rate", "64MiB"}},
    {"", {"--json", "snapshot", "write"}},
    {"", {"snapshot", "list"}},
    {"", {"backup", "lantern", "--rate", "100000000"}},
    {"", {"--json", "backup"}},
    {"", {"rebuild", "--set", "title_weight=2", "--wait"}},
    {"", {"--json", "rebuild"}},
    {"", {"withdraw", "wick", "gale"}},
    {"", {"--json", "withdraw", "entry 1"}},
};

_Static_assert(sizeof COMMANDS / sizeof COMMANDS[0] <= PLAYED_COMMANDS, "there is room for all");

const char *played_name(const struct played *played)
{
    static _Thread_local char name[512];
    size_t length = 0;
    name[0] = '\0';
    for (size_t i = 0; played->command->arguments[i]; i++) {
        int written = snprintf(name + length, sizeof name - length, "%s%s", i > 0 ? " " : "",
                               played->command->arguments[i]);
        assert_in_range(written, 0, sizeof name - length - 1);
        length += (size_t)written;
    }
    return name;
}

void every_command_run(const struct every_command *all, const struct played *played,
                       const struct program_way *way, struct program_run *ret_run)
{
    char paths[PLAYED_ARGUMENTS][UNDERTAGD_PATH_BYTES];
    const char *arguments[PLAYED_ARGUMENTS + 3] = {"--socket", all->stand_in_path};
    for (size_t i = 0; played->command->arguments[i]; i++) {
        const char *argument = played->command->arguments[i];
        if (argument[0] == '@') {
            undertagd_path(&all->daemon, argument + 1, paths[i]);
            argument = paths[i];
        }
        arguments[i + 2] = argument;
    }
    program_run_by(way ? way : &(struct program_way){0}, "undertag", arguments,
                   played->command->input, ret_run);
}

static bool is_code(int exit_code)
{
    return exit_code >= EX__BASE && exit_code <= EX__MAX;
}

void assert_ended_with_a_sentence(const struct played *played, const struct program_run *run)
{
    static const char BEGIN[] = "undertag: ";
    const char *end = strchr(run->error, '\n');
    if (!is_code(run->exit_code) || strncmp(run->error, BEGIN, strlen(BEGIN)) != 0 || !end ||
        end[1] != '\0' || end - run->error < (ptrdiff_t)sizeof BEGIN) {
        fail_msg("%s: ended with %d and said on standard error: '%s', on standard output: %s",
                 played_name(played), run->exit_code, run->error, run->output);
    }
}

/* --- the first time -------------------------------------------------------------------------- */

/* Of a wait, the answers to the first and the last question are kept: how many are in between is
 * the daemon's affair. */
static void keep_ends(struct rehearsal *rehearsal)
{
    while (rehearsal->count > 2) {
        json_decref(rehearsal->answers[1]);
        rehearsal->count--;
        memmove(&rehearsal->answers[1], &rehearsal->answers[2],
                (rehearsal->count - 1) * sizeof rehearsal->answers[1]);
    }
}

static void play(struct every_command *all, struct played *played, struct peer *peer)
{
    struct program_run run;
    stand_in_pass_on(&all->stand_in, all->daemon.socket, &played->rehearsal);
    every_command_run(all, played, NULL, &run);
    stand_in_rest(&all->stand_in);
    if (run.exit_code != 0 || *run.error) {
        fail_msg("%s: ended with %d: %s", played_name(played), run.exit_code, run.error);
    }
    if (strcmp(played->command->arguments[0], "rebuild") == 0) {
        keep_ends(&played->rehearsal);
    }
    wait_until_rebuilt(peer);
    wait_until_learned(peer);
    played->output = strdup(run.output);
    assert_non_null(played->output);
}

/* Once more without the daemon: this is what every later run is compared with. */
static void assert_repeats(struct every_command *all, struct played *played)
{
    struct program_run run;
    stand_in_repeat(&all->stand_in, &played->rehearsal);
    every_command_run(all, played, NULL, &run);
    if (run.exit_code != 0 || *run.error || strcmp(run.output, played->output) != 0) {
        fail_msg("%s: with the same answers it ended with %d: %s%s", played_name(played),
                 run.exit_code, run.output, run.error);
    }
}

int every_command_set_up(void **state)
{
    struct every_command *all = calloc(1, sizeof *all);
    struct peer peer;
    assert_non_null(all);
    *state = all;
    undertagd_make(&all->daemon);
    undertagd_write(&all->daemon, "lines.jsonl", LINES);
    undertagd_path(&all->daemon, "page.html", all->page);
    undertagd_path(&all->daemon, "stand-in", all->stand_in_path);
    undertagd_start(&all->daemon);
    peer_open(&peer, all->daemon.socket);
    logbook_file(&peer, 0, 24, 6);
    wait_until_learned(&peer);
    stand_in_start(&all->stand_in, all->stand_in_path);
    for (; all->count < sizeof COMMANDS / sizeof COMMANDS[0]; all->count++) {
        all->played[all->count].command = &COMMANDS[all->count];
        play(all, &all->played[all->count], &peer);
    }
    peer_close(&peer);
    assert_int_equal(undertagd_stop(&all->daemon), 0);
    for (size_t i = 0; i < all->count; i++) {
        assert_repeats(all, &all->played[i]);
    }
    return 0;
}

int every_command_tear_down(void **state)
{
    struct every_command *all = *state;
    stand_in_stop(&all->stand_in);
    for (size_t i = 0; i < all->count; i++) {
        rehearsal_deinit(&all->played[i].rehearsal);
        free(all->played[i].output);
    }
    int result = undertagd_remove(&all->daemon);
    free(all);
    return result;
}
