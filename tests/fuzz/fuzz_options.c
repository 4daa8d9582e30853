/*
 * The configuration: a file of options, and the pairs of --set.
 *
 * Input: the file. It is read over the defaults; then each of its lines is set as --set does it.
 */
#include <sys/mman.h>
#include <unistd.h>

#include "daemon/options.h"

#include "tests/fuzz/home.h"

enum {
    PATH_BYTES = 64,
    FILE_BYTES = 8192 /* what all options take as text */
};

/* A file in memory, which has a path nevertheless. */
static int memory_file(char path[PATH_BYTES])
{
    static int file = -1;
    if (file < 0) {
        file = memfd_create("options", MFD_CLOEXEC);
        FUZZ_NEED(file >= 0, "no file in memory");
    }
    (void)snprintf(path, PATH_BYTES, "/proc/self/fd/%d", file);
    return file;
}

static void write_file(const void *bytes, size_t size, char path[PATH_BYTES])
{
    int file = memory_file(path);
    FUZZ_NEED(ftruncate(file, 0) == 0 && pwrite(file, bytes, size, 0) == (ssize_t)size,
              "the file in memory cannot be written");
}

/* --- properties --- */

/* Options that differ differ in what is told of them. */
static bool are_same(const struct options *left, const struct options *right)
{
    bool same = true;
    for (size_t i = 0; i < options_count(); i++) {
        struct options_row rows[2];
        options_describe(left, i, &rows[0]);
        options_describe(right, i, &rows[1]);
        same = same && strcmp(rows[0].value, rows[1].value) == 0;
    }
    return same;
}

/* What has been taken is within bounds: as text it is taken again, and is the same. */
static void check_taken(const struct options *options)
{
    char text[FILE_BYTES];
    char path[PATH_BYTES];
    char error[OPTIONS_ERROR_BYTES] = "";
    size_t used = 0;
    struct options again;
    options_defaults(&again);
    for (size_t i = 0; i < options_count(); i++) {
        struct options_row row;
        options_describe(options, i, &row);
        used += (size_t)snprintf(text + used, sizeof text - used, "%s = %s\n", row.name, row.value);
        FUZZ_CHECK(used < sizeof text);
    }
    write_file(text, used, path);
    int code = options_read_file(&again, path, error);
    (void)fprintf(stderr, "%s", error); /* "" where it is taken */
    FUZZ_CHECK(code == 0);
    FUZZ_CHECK(are_same(options, &again));
}

static void check_sentence(const char *error)
{
    FUZZ_CHECK(error[0] != '\0' && strlen(error) < OPTIONS_ERROR_BYTES);
    FUZZ_CHECK(!strchr(error, '\n'));
}

static void check_file(struct fuzz_input file)
{
    char path[PATH_BYTES];
    char error[OPTIONS_ERROR_BYTES] = "";
    struct options options;
    struct options defaults;
    options_defaults(&options);
    options_defaults(&defaults);
    write_file(file.data, file.size, path);
    if (options_read_file(&options, path, error) < 0) {
        check_sentence(error);
        FUZZ_CHECK(strstr(error, ", line ")); /* of a file that can be read */
        FUZZ_CHECK(are_same(&options, &defaults));
    } else {
        check_taken(&options);
    }
}

static void check_pair(struct fuzz_input line)
{
    char *pair = fuzz_text(line);
    char error[OPTIONS_ERROR_BYTES] = "";
    struct options options;
    struct options defaults;
    options_defaults(&options);
    options_defaults(&defaults);
    if (options_set_pair(&options, pair, error) < 0) {
        FUZZ_CHECK(error[0] != '\0' && strlen(error) < OPTIONS_ERROR_BYTES);
        FUZZ_CHECK(are_same(&options, &defaults));
    } else {
        check_taken(&options);
    }
    free(pair);
}

int LLVMFuzzerTestOneInput(const uint8_t *data, size_t size)
{
    struct fuzz_input input = {.data = data, .size = size};
    check_file(input);
    for (int i = 0; i < 16 && input.size > 0; i++) {
        check_pair(fuzz_until(&input, '\n'));
    }
    return 0;
}

/* --- made inputs --- */

uint8_t *fuzz_made(size_t number, size_t *ret_size)
{
    switch (number) {
    case 0:
        return fuzz_repeated("step = ", "9", 8U << 20U, "\n", ret_size);
    case 1:
        return fuzz_repeated("# ", "lamp ", 1U << 20U, "\nstep = 1\n", ret_size);
    case 2:
        return fuzz_repeated("", "# fog\n", 1U << 20U, "step = 2\nstep = 2\n", ret_size);
    case 3:
        return fuzz_repeated("", " ", 1U << 20U, "step = 1\n", ret_size);
    default:
        return NULL;
    }
}
