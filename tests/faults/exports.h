/*
 * exports: the snapshots of a home, looked at from outside.
 */
#ifndef UNDERTAG_TESTS_EXPORTS_H
#define UNDERTAG_TESTS_EXPORTS_H

/* Every folder in HOME/exports has a manifest, and files with the sums that it gives; so has what
 * `latest` leads to, where there is any. Returns how many there are. */
unsigned exports_assert_whole(const char *home);

#endif
