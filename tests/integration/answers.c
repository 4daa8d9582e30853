#include "tests/integration/answers.h"

#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>

#include <cmocka.h>
#include <poll.h>
#include <stdio.h>
#include <string.h>

#include "tests/integration/logbook.h"

enum {
    DRAFTS = 20,
    DRAFT_WORDS = 16,
    FIRST_DRAFT = 1000000 /* of the logbook's entries: none that was filed */
};

/* The answer but for the seq that it was learned up to; one that is refused has none. */
static void add_answer(json_t *list, struct peer *peer, const char *question)
{
    unsigned id =
        peer_request(peer, "item.gaps", "{%s, 'floor': 0, 'most': 1000, 'why': true}", question);
    json_t *answer = peer_answer(peer);
    assert_int_equal(whole(answer, "id"), id);
    json_t *result = json_object_get(answer, "result");
    if (result) {
        (void)json_object_del(result, "learned"); /* it is there */
    }
    assert_int_equal(json_array_append(list, result ? result : json_null()), 0);
}

const char *answers_of(struct peer *peer, unsigned items)
{
    json_t *list = json_array();
    char question[12 * DRAFT_WORDS + 32];
    char text[12 * DRAFT_WORDS + 1];
    assert_non_null(list);
    for (unsigned item = 0; item < items; item++) {
        (void)snprintf(question, sizeof question, "'id': 'entry %u'", item);
        add_answer(list, peer, question);
    }
    for (unsigned draft = 0; draft < DRAFTS; draft++) {
        logbook_text(FIRST_DRAFT + draft, DRAFT_WORDS, text, sizeof text);
        (void)snprintf(question, sizeof question, "'text': '%s'", text);
        add_answer(list, peer, question);
    }
    const char *all = text_of(peer, list);
    json_decref(list);
    return all;
}

void wait_until_rebuilt(struct peer *peer)
{
    enum {
        ASK_EVERY_MS = 5,
        PATIENCE_MS = 120 * 1000
    };
    for (int waited_ms = 0;
         !json_is_null(json_object_get(ask(peer, "daemon.state", "{}"), "rebuild"));
         waited_ms += ASK_EVERY_MS) {
        assert_true(waited_ms < PATIENCE_MS);
        (void)poll(NULL, 0, ASK_EVERY_MS); /* between two questions: building needs the core */
    }
}
