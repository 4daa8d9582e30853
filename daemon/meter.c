#include "daemon/meter.h"

void meter_sample(struct meter *meter, uint64_t total, uint64_t now_ms)
{
    meter->samples[meter->next].total = total;
    meter->samples[meter->next].at_ms = now_ms;
    meter->next = (meter->next + 1) % METER_SAMPLES;
    meter->count += meter->count < METER_SAMPLES;
}

double meter_rate(const struct meter *meter, uint64_t total, uint64_t now_ms)
{
    if (meter->count == 0) {
        return 0.0;
    }
    size_t oldest = (meter->next + METER_SAMPLES - meter->count) % METER_SAMPLES;
    uint64_t passed_ms = now_ms - meter->samples[oldest].at_ms;
    uint64_t risen = total - meter->samples[oldest].total;
    return passed_ms > 0 ? (double)risen * 1000.0 / (double)passed_ms : 0.0;
}
