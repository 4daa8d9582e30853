/*
 * Lists of users and groups. The names looked up are root's, which every system has with the number
 * 0 (user: passwd(5); group: Debian's base-passwd), and one that none has.
 */
#include "daemon/accounts.h"

#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>
#include <stdio.h>
#include <string.h>

#include <cmocka.h>

struct reading {
    struct rights_list list;
    char reason[ACCOUNTS_REASON_BYTES];
    char text[ACCOUNTS_TEXT_BYTES];
};

/* The list as it is written again; fails where it cannot be read. */
static const char *read_back(struct reading *reading, const char *text)
{
    if (accounts_read(text, &reading->list, reading->reason) != 0) {
        fail_msg("%s: %s", text, reading->reason);
    }
    accounts_write(&reading->list, reading->text);
    return reading->text;
}

static void assert_refused(const char *text, const char *reason)
{
    struct reading reading = {.list.count = 7};
    assert_int_equal(accounts_read(text, &reading.list, reading.reason), -1);
    if (!strstr(reading.reason, reason)) {
        fail_msg("%s: %s", text, reading.reason);
    }
    assert_int_equal(reading.list.count, 7); /* untouched */
}

static void numbers_are_taken_as_they_are(void **state)
{
    (void)state;
    struct reading reading;
    assert_string_equal(read_back(&reading, "1911 @50"), "1911 @50");
    assert_int_equal(reading.list.count, 2);
    assert_int_equal(reading.list.kinds[0], RIGHTS_USER);
    assert_int_equal(reading.list.ids[0], 1911);
    assert_int_equal(reading.list.kinds[1], RIGHTS_GROUP);
    assert_int_equal(reading.list.ids[1], 50);
}

static void names_are_looked_up(void **state)
{
    (void)state;
    struct reading reading;
    assert_string_equal(read_back(&reading, "root @root"), "0 @0");
}

static void commas_part_words_as_spaces_do(void **state)
{
    (void)state;
    struct reading reading;
    assert_string_equal(read_back(&reading, " 1,2 ,@3,\t4, "), "1 2 @3 4");
}

static void no_word_is_nobody(void **state)
{
    (void)state;
    struct reading reading;
    assert_string_equal(read_back(&reading, ""), "");
    assert_string_equal(read_back(&reading, " , "), "");
    assert_int_equal(reading.list.count, 0);
}

static void the_sockets_group_has_a_word_of_its_own(void **state)
{
    (void)state;
    struct reading reading;
    assert_string_equal(read_back(&reading, "@socket"), "@socket");
    assert_int_equal(reading.list.kinds[0], RIGHTS_SOCKET_GROUP);
}

static void who_is_given_twice_is_there_once(void **state)
{
    (void)state;
    struct reading reading;
    assert_string_equal(read_back(&reading, "5 @5 005 @5"), "5 @5");
}

static void the_same_list_has_the_same_bytes(void **state)
{
    (void)state;
    struct reading one;
    struct reading other;
    memset(&one, 0x55, sizeof one);
    memset(&other, 0xAA, sizeof other);
    (void)read_back(&one, "root @7");
    (void)read_back(&other, "0,@7");
    assert_memory_equal(&one.list, &other.list, sizeof one.list);
}

static void a_name_that_is_not_there_is_refused_by_name(void **state)
{
    (void)state;
    assert_refused("root no-such-keeper", "there is no user 'no-such-keeper'");
    assert_refused("@no-such-harbour", "there is no group 'no-such-harbour'");
    assert_refused("@", "there is no group ''");
}

/* All bits set is "no user" to chown(2) and "no credentials" to us. */
static void a_number_beyond_those_of_users_is_refused(void **state)
{
    (void)state;
    struct reading reading;
    assert_string_equal(read_back(&reading, "4294967294"), "4294967294");
    assert_refused("4294967295", "4294967295");
    assert_refused("@99999999999999999999", "99999999999999999999");
}

static void a_word_too_long_for_a_name_is_refused(void **state)
{
    (void)state;
    char text[ACCOUNTS_WORD_BYTES + 1];
    memset(text, 'k', sizeof text);
    text[sizeof text - 1] = '\0';
    assert_refused(text, "too long");
}

static void a_list_too_long_is_refused(void **state)
{
    (void)state;
    char text[(RIGHTS_ENTRIES + 1) * 5 + 1] = "";
    for (int i = 0; i <= RIGHTS_ENTRIES; i++) {
        (void)snprintf(text + strlen(text), sizeof text - strlen(text), "%d ", 1000 + i);
    }
    assert_refused(text, "more than 32");
}

static void the_longest_list_can_be_written(void **state)
{
    (void)state;
    struct reading reading = {0};
    for (uint32_t i = 0; i < RIGHTS_ENTRIES; i++) {
        assert_true(rights_add(&reading.list, RIGHTS_GROUP, RIGHTS_NO_ID - 1 - i));
    }
    accounts_write(&reading.list, reading.text);
    /* 32 times "@42949672xx" and 31 spaces */
    assert_int_equal(strlen(reading.text), RIGHTS_ENTRIES * 12 - 1);
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(numbers_are_taken_as_they_are),
        cmocka_unit_test(names_are_looked_up),
        cmocka_unit_test(commas_part_words_as_spaces_do),
        cmocka_unit_test(no_word_is_nobody),
        cmocka_unit_test(the_sockets_group_has_a_word_of_its_own),
        cmocka_unit_test(who_is_given_twice_is_there_once),
        cmocka_unit_test(the_same_list_has_the_same_bytes),
        cmocka_unit_test(a_name_that_is_not_there_is_refused_by_name),
        cmocka_unit_test(a_number_beyond_those_of_users_is_refused),
        cmocka_unit_test(a_word_too_long_for_a_name_is_refused),
        cmocka_unit_test(a_list_too_long_is_refused),
        cmocka_unit_test(the_longest_list_can_be_written),
    };
    return cmocka_run_group_tests(tests, NULL, NULL);
}
