#include "tests/integration/program.h"

#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>

#include <cmocka.h>
#include <fcntl.h>
#include <string.h>
#include <sys/mman.h>
#include <unistd.h>

#include "tests/integration/child.h"

enum {
    ARGUMENTS_MOST = 30
};

/* A file that is only in memory, which holds the text and is read from its start. */
static int memory_file(const char *text)
{
    int fd = memfd_create("stream", MFD_CLOEXEC);
    size_t size = strlen(text);
    assert_true(fd >= 0);
    assert_int_equal(write(fd, text, size), size);
    assert_int_equal(lseek(fd, 0, SEEK_SET), 0);
    return fd;
}

/* What has been written to it, and closes it. */
static void read_all(int fd, char text[PROGRAM_TEXT_BYTES])
{
    ssize_t size = pread(fd, text, PROGRAM_TEXT_BYTES, 0);
    assert_in_range(size, 0, PROGRAM_TEXT_BYTES - 1);
    text[size] = '\0';
    assert_int_equal(close(fd), 0);
}

void program_run_by(const struct program_way *way, const char *name, const char *const *arguments,
                    const char *input, struct program_run *ret_run)
{
    char path[CHILD_PATH_BYTES];
    const char *argv[ARGUMENTS_MOST + 2] = {path};
    struct child child;
    child_program(name, path);
    for (size_t i = 0; arguments[i]; i++) {
        assert_true(i < ARGUMENTS_MOST);
        argv[i + 1] = arguments[i];
    }
    int streams[] = {memory_file(input), memory_file(""), memory_file("")};
    child_start(&child, argv, way->environment, streams[0], way->output ? way->output : streams[1],
                streams[2]);
    ret_run->exit_code = child_wait(&child);
    assert_int_equal(close(streams[0]), 0);
    read_all(streams[1], ret_run->output);
    read_all(streams[2], ret_run->error);
    assert_null(strstr(ret_run->error, "Sanitizer"));
}

void program_run(const char *name, const char *const *arguments, const char *input,
                 struct program_run *ret_run)
{
    program_run_by(&(struct program_way){0}, name, arguments, input, ret_run);
}
