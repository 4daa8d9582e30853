/*
 * Gives a target the files of a folder, and what it makes itself, one after the other: what was
 * found once is an ordinary test from then on. Usage: fuzz_x FOLDER
 *
 * A target ends the program where a property does not hold; so the last name that was shown is the
 * one to look at.
 */
#include <dirent.h>

#include "tests/fuzz/fuzz.h"

enum {
    PATH_BYTES = 1024
};

static uint8_t *read_file(const char *path, size_t *ret_size)
{
    FILE *file = fopen(path, "rbe");
    if (!file || fseek(file, 0, SEEK_END) != 0) {
        perror(path);
        exit(1);
    }
    long size = ftell(file);
    uint8_t *bytes = fuzz_room((size_t)size);
    rewind(file);
    if (size < 0 || fread(bytes, 1, (size_t)size, file) != (size_t)size || fclose(file) != 0) {
        perror(path);
        exit(1);
    }
    *ret_size = (size_t)size;
    return bytes;
}

static void run_take(const char *name, uint8_t *bytes, size_t size)
{
    (void)printf("%s, %zu bytes\n", name, size);
    (void)fflush(stdout); /* it may be the last that is seen */
    (void)LLVMFuzzerTestOneInput(bytes, size);
    free(bytes);
}

static int is_visible(const struct dirent *entry)
{
    return entry->d_name[0] != '.';
}

static size_t run_folder(const char *folder)
{
    struct dirent **entries = NULL;
    int count = scandir(folder, &entries, is_visible, alphasort);
    if (count < 0) {
        perror(folder);
        exit(1);
    }
    for (int i = 0; i < count; i++) {
        char path[PATH_BYTES];
        size_t size = 0;
        (void)snprintf(path, sizeof path, "%s/%s", folder, entries[i]->d_name);
        uint8_t *bytes = read_file(path, &size);
        run_take(path, bytes, size);
        free(entries[i]);
    }
    free(entries);
    return (size_t)count;
}

static size_t run_made(void)
{
    size_t number = 0;
    size_t size = 0;
    for (uint8_t *made = NULL; (made = fuzz_made(number, &size)); number++) {
        char name[32];
        (void)snprintf(name, sizeof name, "made input %zu", number);
        run_take(name, made, size);
    }
    return number;
}

int main(int argc, char **argv)
{
    if (argc != 2) {
        (void)fputs("usage: fuzz_x FOLDER\n", stderr);
        return 64;
    }
    size_t count = run_folder(argv[1]);
    count += run_made();
    (void)printf("%zu passed, 0 failed\n", count);
    return 0;
}
