#include "daemon/troubles.h"

#include <stdarg.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

#include "daemon/log.h"

int troubles_init(struct troubles *troubles)
{
    memset(troubles->sentences, 0, sizeof troubles->sentences);
    return -pthread_mutex_init(&troubles->mutex, NULL);
}

void troubles_deinit(struct troubles *troubles)
{
    (void)pthread_mutex_destroy(&troubles->mutex); /* nobody holds it any more */
}

static void lock(struct troubles *troubles)
{
    if (pthread_mutex_lock(&troubles->mutex) != 0) {
        abort(); /* an error of ours alone */
    }
}

static void unlock(struct troubles *troubles)
{
    if (pthread_mutex_unlock(&troubles->mutex) != 0) {
        abort();
    }
}

void troubles_begin(struct troubles *troubles, enum trouble trouble, const char *format, ...)
{
    char sentence[TROUBLE_BYTES];
    va_list arguments;
    va_start(arguments, format);
    (void)vsnprintf(sentence, sizeof sentence, format, arguments); /* cut where it is long */
    va_end(arguments);
    lock(troubles);
    char *stored = troubles->sentences[trouble];
    if (stored[0] == '\0') {
        log_line(LOG_TROUBLE, "%s", sentence);
    }
    memcpy(stored, sentence, sizeof sentence);
    unlock(troubles);
}

void troubles_end(struct troubles *troubles, enum trouble trouble)
{
    lock(troubles);
    if (troubles->sentences[trouble][0] != '\0') {
        log_line(LOG_NOTE, "over: %s", troubles->sentences[trouble]);
        troubles->sentences[trouble][0] = '\0';
    }
    unlock(troubles);
}

void troubles_read(struct troubles *troubles, enum trouble trouble, char sentence[TROUBLE_BYTES])
{
    lock(troubles);
    memcpy(sentence, troubles->sentences[trouble], TROUBLE_BYTES);
    unlock(troubles);
}
