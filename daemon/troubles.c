#include "daemon/troubles.h"

#include <stdarg.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

#include "daemon/log.h"
#include "daemon/sync.h"

int troubles_init(struct troubles *troubles)
{
    memset(troubles->sentences, 0, sizeof troubles->sentences);
    return -pthread_mutex_init(&troubles->mutex, NULL);
}

void troubles_deinit(struct troubles *troubles)
{
    (void)pthread_mutex_destroy(&troubles->mutex); /* nobody holds it any more */
}

void troubles_begin(struct troubles *troubles, enum trouble trouble, const char *format, ...)
{
    char sentence[TROUBLE_BYTES];
    va_list arguments;
    va_start(arguments, format);
    (void)vsnprintf(sentence, sizeof sentence, format, arguments); /* cut where it is long */
    va_end(arguments);
    sync_lock(&troubles->mutex);
    char *stored = troubles->sentences[trouble];
    if (stored[0] == '\0') {
        log_line(LOG_TROUBLE, "%s", sentence);
    }
    memcpy(stored, sentence, sizeof sentence);
    sync_unlock(&troubles->mutex);
}

void troubles_end(struct troubles *troubles, enum trouble trouble)
{
    sync_lock(&troubles->mutex);
    if (troubles->sentences[trouble][0] != '\0') {
        log_line(LOG_NOTE, "over: %s", troubles->sentences[trouble]);
        troubles->sentences[trouble][0] = '\0';
    }
    sync_unlock(&troubles->mutex);
}

void troubles_read(struct troubles *troubles, enum trouble trouble, char sentence[TROUBLE_BYTES])
{
    sync_lock(&troubles->mutex);
    memcpy(sentence, troubles->sentences[trouble], TROUBLE_BYTES);
    sync_unlock(&troubles->mutex);
}
