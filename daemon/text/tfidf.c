#include "daemon/text/tfidf.h"

#include <math.h>

double tfidf_frequency_weight(double frequency)
{
    if (!(frequency > 0.0)) {
        return 0.0;
    }
    return frequency < 1.0 ? frequency : 1.0 + log(frequency);
}

double tfidf_idf(double documents, double document_count)
{
    return log1p(fmax(documents, 1.0) / fmax(document_count, 1.0));
}

void tfidf_normalise(float *x, size_t n)
{
    double squares = 0.0;
    for (size_t i = 0; i < n; i++) {
        squares += (double)x[i] * (double)x[i];
    }
    if (squares == 0.0) {
        return;
    }
    double scale = 1.0 / sqrt(squares);
    for (size_t i = 0; i < n; i++) {
        x[i] = (float)((double)x[i] * scale);
    }
}
