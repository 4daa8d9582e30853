/* Times of RFC 3339. The milliseconds were worked out with Python's datetime module. */
#include "daemon/times.h"

#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>

#include <cmocka.h>
#include <string.h>

static void assert_time(const char *text, int64_t expected_ms)
{
    int64_t ms = 0;
    if (!times_parse(text, &ms)) {
        fail_msg("%s is not read", text);
    }
    assert_int_equal(ms, expected_ms);
}

static void assert_no_time(const char *text)
{
    int64_t ms = 77;
    if (times_parse(text, &ms)) {
        fail_msg("'%s' is read", text);
    }
    assert_int_equal(ms, 77);
}

/* RFC 3339, section 5.8. */
static void the_examples_of_rfc_3339_are_read(void **state)
{
    (void)state;
    assert_time("1985-04-12T23:20:50.52Z", 482196050520);
    assert_time("1996-12-19T16:39:57-08:00", 851042397000);
    assert_time("1996-12-20T00:39:57Z", 851042397000); /* "the same instant", it says */
    assert_time("1937-01-01T12:00:27.87+00:20", -1041337172130);
}

/* The two leap seconds of section 5.8, also one instant; ours is the second after it. */
static void a_leap_second_is_the_second_after_it(void **state)
{
    (void)state;
    assert_time("1990-12-31T23:59:60Z", 662688000000);
    assert_time("1990-12-31T15:59:60-08:00", 662688000000);
    assert_time("1991-01-01T00:00:00Z", 662688000000);
}

/* RFC 3339, appendix C: a year divides by 4, and not by 100 unless by 400. */
static void february_has_29_days_in_leap_years_only(void **state)
{
    (void)state;
    assert_time("2000-02-29T00:00:00Z", 951782400000);
    assert_time("1904-02-29T00:00:00Z", -2077747200000);
    assert_no_time("1900-02-29T00:00:00Z");
    assert_no_time("1911-02-29T00:00:00Z");
    assert_time("1900-02-28T00:00:00Z", -2203977600000);
}

static void every_month_has_its_days(void **state)
{
    (void)state;
    static const char *const LAST_DAYS[] = {"01-31", "02-28", "03-31", "04-30", "05-31", "06-30",
                                            "07-31", "08-31", "09-30", "10-31", "11-30", "12-31"};
    for (size_t i = 0; i < sizeof LAST_DAYS / sizeof LAST_DAYS[0]; i++) {
        char text[] = "1911-MM-DDT00:00:00Z";
        int64_t ms = 0;
        memcpy(text + 5, LAST_DAYS[i], 5);
        assert_true(times_parse(text, &ms));
        text[9]++; /* 31 -> 32, 30 -> 31, 28 -> 29 */
        assert_no_time(text);
    }
}

static void offsets_are_taken_off(void **state)
{
    (void)state;
    const int64_t noon = -1856088000000; /* 1911-03-09T12:00:00Z */
    assert_time("1911-03-09T12:00:00Z", noon);
    assert_time("1911-03-09T13:00:00+01:00", noon);
    assert_time("1911-03-09T06:30:00-05:30", noon);
    assert_time("1911-03-10T11:59:00+23:59", noon);
    assert_time("1911-03-09T12:00:00-00:00", noon); /* section 4.3: UTC, the place unknown */
}

/* Section 5.6 allows both letters in lower case. */
static void t_and_z_may_be_small(void **state)
{
    (void)state;
    assert_time("1996-12-20t00:39:57z", 851042397000);
}

static void what_is_finer_than_a_millisecond_is_dropped(void **state)
{
    (void)state;
    assert_time("1970-01-01T00:00:00.9999999Z", 999);
    assert_time("1970-01-01T00:00:00.5Z", 500);
    assert_time("1970-01-01T00:00:00.0004Z", 0);
}

static void anything_else_is_no_time(void **state)
{
    (void)state;
    static const char *const TEXTS[] = {
        "",
        "1911",
        "1911-03-09",
        "1911-03-09T18:30:00",       /* no offset */
        "1911-03-09T18:30Z",         /* no seconds */
        "1911-03-09 18:30:00Z",      /* section 5.6 leaves the space to applications */
        "1911-3-09T18:30:00Z",       /* one digit */
        "11911-03-09T18:30:00Z",     /* five */
        "1911-00-09T18:30:00Z",      /* no such month */
        "1911-13-09T18:30:00Z",      /* likewise */
        "1911-03-00T18:30:00Z",      /* no such day */
        "1911-03-09T24:00:00Z",      /* no such hour in RFC 3339 */
        "1911-03-09T18:60:00Z",      /* no such minute */
        "1911-03-09T18:30:61Z",      /* no such second */
        "1911-03-09T18:30:00.Z",     /* a fraction without digits */
        "1911-03-09T18:30:00,5Z",    /* ISO 8601's comma */
        "1911-03-09T18:30:00+0100",  /* no colon */
        "1911-03-09T18:30:00+01",    /* no minutes */
        "1911-03-09T18:30:00+24:00", /* no such offset */
        "1911-03-09T18:30:00+01:60", /* likewise */
        "1911-03-09T18:30:00Z ",     /* something behind it */
        " 1911-03-09T18:30:00Z",     /* something before it */
        "-911-03-09T18:30:00Z",
    };
    for (size_t i = 0; i < sizeof TEXTS / sizeof TEXTS[0]; i++) {
        assert_no_time(TEXTS[i]);
    }
}

/* --- writing --- */

static void assert_written(int64_t ms, const char *expected)
{
    char text[TIMES_BYTES];
    times_format(ms, text);
    assert_string_equal(text, expected);
}

static void a_time_is_written_in_utc(void **state)
{
    (void)state;
    assert_written(0, "1970-01-01T00:00:00Z");
    assert_written(851042397000, "1996-12-20T00:39:57Z");
    assert_written(-1856064600000, "1911-03-09T18:30:00Z");
}

static void milliseconds_are_written_where_there_are_any(void **state)
{
    (void)state;
    assert_written(482196050520, "1985-04-12T23:20:50.520Z");
    assert_written(-1041337172130, "1937-01-01T11:40:27.870Z");
    assert_written(-1, "1969-12-31T23:59:59.999Z");
}

/* Section 5.6: date-fullyear = 4DIGIT. */
static void a_year_has_four_digits(void **state)
{
    (void)state;
    assert_written(-33412973400000, "0911-03-09T18:30:00Z");
    assert_written(-62135596800000, "0001-01-01T00:00:00Z");
    assert_written(253402300799999, "9999-12-31T23:59:59.999Z");
}

static void what_is_written_is_read_back(void **state)
{
    (void)state;
    const int64_t step = 86400000LL * 97 + 12345; /* 97 days and something */
    for (int64_t ms = -62135596800000; ms < 253402300799999; ms += step) {
        char text[TIMES_BYTES];
        times_format(ms, text);
        assert_time(text, ms);
    }
}

/* The first and the last years are a little longer elsewhere, but cannot be written in UTC. */
static void a_time_that_four_digits_cannot_tell_in_utc_is_no_time(void **state)
{
    (void)state;
    assert_no_time("9999-12-31T23:59:59-00:01");
    assert_no_time("0000-01-01T00:00:00+00:01");
    assert_no_time("9999-12-31T23:59:60Z");
    assert_time("9999-12-31T23:59:59.999Z", 253402300799999);
    assert_time("0000-01-01T00:00:00Z", -62167219200000);
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(the_examples_of_rfc_3339_are_read),
        cmocka_unit_test(a_leap_second_is_the_second_after_it),
        cmocka_unit_test(february_has_29_days_in_leap_years_only),
        cmocka_unit_test(every_month_has_its_days),
        cmocka_unit_test(offsets_are_taken_off),
        cmocka_unit_test(t_and_z_may_be_small),
        cmocka_unit_test(what_is_finer_than_a_millisecond_is_dropped),
        cmocka_unit_test(anything_else_is_no_time),
        cmocka_unit_test(a_time_is_written_in_utc),
        cmocka_unit_test(milliseconds_are_written_where_there_are_any),
        cmocka_unit_test(a_year_has_four_digits),
        cmocka_unit_test(what_is_written_is_read_back),
        cmocka_unit_test(a_time_that_four_digits_cannot_tell_in_utc_is_no_time),
    };
    return cmocka_run_group_tests(tests, NULL, NULL);
}
