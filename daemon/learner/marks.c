#include "daemon/learner/marks.h"

#include <errno.h>
#include <stdlib.h>
#include <string.h>

#include "daemon/grow.h"

void marks_deinit(struct marks *marks)
{
    free(marks->list);
    free(marks->is_set);
    memset(marks, 0, sizeof *marks);
}

int marks_add(struct marks *marks, uint32_t number)
{
    if (number < marks->is_set_capacity && marks->is_set[number]) {
        return 0;
    }
    if (GROW(&marks->is_set, &marks->is_set_capacity, (size_t)number + 1) < 0 ||
        GROW(&marks->list, &marks->list_capacity, marks->count + 1) < 0) {
        return -ENOMEM;
    }
    marks->is_set[number] = 1;
    marks->list[marks->count++] = number;
    return 0;
}

int marks_join(struct marks *marks, const struct marks *other)
{
    int result = 0;
    for (size_t i = 0; i < other->count && result == 0; i++) {
        result = marks_add(marks, other->list[i]);
    }
    return result;
}

bool marks_has(const struct marks *marks, uint32_t number)
{
    return number < marks->is_set_capacity && marks->is_set[number];
}

void marks_clear(struct marks *marks)
{
    for (size_t i = 0; i < marks->count; i++) {
        marks->is_set[marks->list[i]] = 0;
    }
    marks->count = 0;
}

uint64_t marks_bytes(const struct marks *marks)
{
    return marks->list_capacity * sizeof *marks->list + marks->is_set_capacity;
}
