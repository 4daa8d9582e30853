/* Who may do what, by numbers. The house: a daemon of user 200, whose socket is of group 300. */
#include "daemon/rights.h"

#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>

#include <cmocka.h>

static const struct rights_house HOUSE = {.owner = 200, .socket_group = 300};

/* A peer with his groups, none of which is 0. */
static struct rights_peer peer_of(uint32_t uid, const uint32_t *gids, size_t count)
{
    return (struct rights_peer){.uid = uid, .gids = gids, .gid_count = count};
}

static void assert_allowed(const struct rights_list *list, struct rights_peer peer)
{
    assert_true(rights_allow(list, &HOUSE, &peer));
}

static void assert_refused(const struct rights_list *list, struct rights_peer peer)
{
    assert_false(rights_allow(list, &HOUSE, &peer));
}

static void add(struct rights_list *list, enum rights_kind kind, uint32_t id)
{
    assert_true(rights_add(list, kind, id));
}

/* --- whoever may always --- */

static void root_may_what_no_list_says(void **state)
{
    (void)state;
    assert_allowed(&(struct rights_list){0}, peer_of(0, NULL, 0));
}

static void the_owner_may_what_no_list_says(void **state)
{
    (void)state;
    assert_allowed(&(struct rights_list){0}, peer_of(200, NULL, 0));
}

static void nobody_else_may_what_no_list_says(void **state)
{
    (void)state;
    static const uint32_t gids[] = {0, 200, 300}; /* root's group, too */
    assert_refused(&(struct rights_list){0}, peer_of(1911, gids, 3));
}

/* --- lists --- */

static void a_user_on_the_list_may(void **state)
{
    (void)state;
    struct rights_list list = {0};
    add(&list, RIGHTS_USER, 1911);
    assert_allowed(&list, peer_of(1911, NULL, 0));
    assert_refused(&list, peer_of(1912, NULL, 0));
}

static void a_member_of_a_group_on_the_list_may(void **state)
{
    (void)state;
    static const uint32_t members[] = {40, 50, 60};
    static const uint32_t others[] = {40, 51, 60};
    struct rights_list list = {0};
    add(&list, RIGHTS_GROUP, 50);
    assert_allowed(&list, peer_of(1911, members, 3));
    assert_refused(&list, peer_of(1911, others, 3));
}

static void the_number_of_a_user_is_no_number_of_a_group(void **state)
{
    (void)state;
    static const uint32_t gids[] = {1911};
    struct rights_list users = {0};
    struct rights_list groups = {0};
    add(&users, RIGHTS_USER, 1911);
    add(&groups, RIGHTS_GROUP, 1911);
    assert_refused(&users, peer_of(5, gids, 1));
    assert_refused(&groups, peer_of(1911, NULL, 0));
}

static void every_entry_of_a_list_counts(void **state)
{
    (void)state;
    struct rights_list list = {0};
    for (uint32_t i = 0; i < RIGHTS_ENTRIES; i++) {
        add(&list, RIGHTS_USER, 1000 + i);
    }
    for (uint32_t i = 0; i < RIGHTS_ENTRIES; i++) {
        assert_allowed(&list, peer_of(1000 + i, NULL, 0));
    }
    assert_refused(&list, peer_of(1000 + RIGHTS_ENTRIES, NULL, 0));
}

static void a_full_list_takes_no_more(void **state)
{
    (void)state;
    struct rights_list list = {0};
    for (uint32_t i = 0; i < RIGHTS_ENTRIES; i++) {
        add(&list, RIGHTS_USER, 1000 + i);
    }
    assert_false(rights_add(&list, RIGHTS_USER, 7));
    assert_refused(&list, peer_of(7, NULL, 0));
    assert_true(rights_add(&list, RIGHTS_USER, 1000)); /* it is there already */
}

/* --- the socket's group --- */

static void a_member_of_the_sockets_group_may_where_that_is_on_the_list(void **state)
{
    (void)state;
    static const uint32_t gids[] = {300};
    struct rights_list list = {0};
    add(&list, RIGHTS_SOCKET_GROUP, 0);
    assert_allowed(&list, peer_of(1911, gids, 1));
    assert_refused(&list, peer_of(1911, NULL, 0));
}

static void a_socket_without_a_group_lets_nobody_in_by_it(void **state)
{
    (void)state;
    static const uint32_t gids[] = {0, RIGHTS_NO_ID};
    const struct rights_house house = {.owner = 200, .socket_group = RIGHTS_NO_ID};
    const struct rights_peer peer = peer_of(1911, gids, 2);
    struct rights_list list = {0};
    add(&list, RIGHTS_SOCKET_GROUP, 0);
    assert_false(rights_allow(&list, &house, &peer));
}

/* --- peers --- */

static void a_peer_that_nobody_knows_may_nothing(void **state)
{
    (void)state;
    static const uint32_t gids[] = {300};
    const struct rights_house house = {.owner = RIGHTS_NO_ID, .socket_group = 300};
    const struct rights_peer peer = peer_of(RIGHTS_NO_ID, gids, 1);
    struct rights_list list = {0};
    add(&list, RIGHTS_SOCKET_GROUP, 0);
    add(&list, RIGHTS_USER, RIGHTS_NO_ID);
    assert_false(rights_allow(&list, &house, &peer));
}

static void groups_are_put_in_order(void **state)
{
    (void)state;
    uint32_t gids[] = {50, 4000000000U, 0, 7};
    static const uint32_t expected[] = {0, 7, 50, 4000000000U};
    rights_sort(gids, 4);
    assert_memory_equal(gids, expected, sizeof expected);
}

static void each_right_names_its_option(void **state)
{
    (void)state;
    static const char *const expected[RIGHT_KINDS] = {"may_read", "may_file", "may_rule",
                                                      "may_vocabulary", "may_operate"};
    for (int right = 0; right < RIGHT_KINDS; right++) {
        assert_string_equal(rights_option((enum right)right), expected[right]);
        assert_memory_equal(rights_purpose((enum right)right), "to ", 3);
    }
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(root_may_what_no_list_says),
        cmocka_unit_test(the_owner_may_what_no_list_says),
        cmocka_unit_test(nobody_else_may_what_no_list_says),
        cmocka_unit_test(a_user_on_the_list_may),
        cmocka_unit_test(a_member_of_a_group_on_the_list_may),
        cmocka_unit_test(the_number_of_a_user_is_no_number_of_a_group),
        cmocka_unit_test(every_entry_of_a_list_counts),
        cmocka_unit_test(a_full_list_takes_no_more),
        cmocka_unit_test(a_member_of_the_sockets_group_may_where_that_is_on_the_list),
        cmocka_unit_test(a_socket_without_a_group_lets_nobody_in_by_it),
        cmocka_unit_test(a_peer_that_nobody_knows_may_nothing),
        cmocka_unit_test(groups_are_put_in_order),
        cmocka_unit_test(each_right_names_its_option),
    };
    return cmocka_run_group_tests(tests, NULL, NULL);
}
