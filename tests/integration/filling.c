#include "tests/integration/filling.h"

#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>

#include <cmocka.h>
#include <stdlib.h>
#include <string.h>

char *filling_text(size_t bytes)
{
    static const char WORDS[] = "fogfogfogfogfogfogfogfogfogfogfogfogfogfogfogfogfogfogfogfogfog "
                                "bellbellbellbellbellbellbellbellbellbellbellbellbellbellbellbell ";
    char *text = malloc(bytes + 1);
    assert_non_null(text);
    for (size_t used = 0; used < bytes; used += sizeof WORDS - 1) {
        size_t left = bytes - used;
        memcpy(text + used, WORDS, left < sizeof WORDS - 1 ? left : sizeof WORDS - 1);
    }
    text[bytes] = '\0';
    return text;
}

unsigned filling_fill(struct peer *peer)
{
    char *text = filling_text(FILLING_BYTES);
    unsigned number = 0;
    bool is_full = false;
    while (!is_full) {
        assert_true(number < FILLINGS_MOST);
        unsigned id = peer_request(
            peer, "item.file", "{'id': 'entry %u', 'text': '%s', 'tags': ['fog']}", number, text);
        const json_t *answer = peer_answer(peer);
        const json_t *error = json_object_get(answer, "error");
        assert_int_equal(whole(answer, "id"), id);
        if (error) {
            assert_error(error, -32005, "");
            is_full = true;
        } else {
            number++;
        }
    }
    free(text);
    return number;
}
