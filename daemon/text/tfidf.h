/*
 * tfidf: how much a term weighs in an item. Pure functions of numbers; any thread.
 *
 * x = w(tf) · idf, L2-normalised over the item (Salton & Buckley 1988: logarithmic frequency,
 * inverse document frequency, cosine normalisation).
 */
#ifndef UNDERTAG_TFIDF_H
#define UNDERTAG_TFIDF_H

#include <stddef.h>

/*
 * w(tf) = 1 + ln tf for tf >= 1, and tf itself below (a title that weighs less than the text): the
 * two meet at tf = 1 in value and slope, so that w rises everywhere and is 0 at 0. At most 0, or
 * not a number, gives 0.
 */
double tfidf_frequency_weight(double frequency);

/*
 * idf = ln(1 + N/n), N the number of documents so far and n the number of those with the term; each
 * counts as at least 1, so that the result is finite and above 0 for any counts, those of a term or
 * a store never seen before included.
 */
double tfidf_idf(double documents, double document_count);

/* Divides x[0..n) by its Euclidean norm; all zero stays all zero. The members are finite. */
void tfidf_normalise(float *x, size_t n);

#endif
