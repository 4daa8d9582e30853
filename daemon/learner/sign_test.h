/*
 * sign_test: of pairs that differ, do more go one way than chance would have it?
 */
#ifndef UNDERTAG_SIGN_TEST_H
#define UNDERTAG_SIGN_TEST_H

#include <stdint.h>

/*
 * The two-sided sign test (Dixon & Mood 1946): min(1, 2·P(X >= max(wins, losses))), X binomial of
 * wins + losses trials with a chance of 1/2; 1 without any. The tail is summed, not approximated.
 * Any thread.
 */
double sign_test(uint64_t wins, uint64_t losses);

#endif
