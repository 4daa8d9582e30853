/*
 * fail_nth: a library to be preloaded into undertagd, which fails the n-th call of a kind, once.
 *
 * The real calls are made past the C library's own names (raw system calls, and the names that
 * glibc exports for allocators that stand before its own), so nothing has to be looked up first.
 * Nothing here allocates.
 *
 * What runs once main has returned is not the program's own any more (a build that counts its
 * branches writes the counts then), and is left alone.
 *
 * Only what can fail is failed: writing to a regular file (no room, an I/O error) and to a socket
 * (the peer is gone), not to an eventfd or a pipe that a program keeps for itself; standard output
 * and standard error are left alone.
 */
#include <dlfcn.h>
#include <errno.h>
#include <fcntl.h>
#include <stdarg.h>
#include <stdbool.h>
#include <stddef.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <sys/mman.h>
#include <sys/stat.h>
#include <sys/syscall.h>
#include <sys/uio.h>
#include <unistd.h>

#include "tests/faults/fail_control.h"

/* NOLINTBEGIN(bugprone-reserved-identifier): glibc's names */
void *__libc_malloc(size_t size);
void *__libc_calloc(size_t count, size_t size);
void *__libc_realloc(void *memory, size_t size);
void *__libc_memalign(size_t alignment, size_t size);
void __libc_free(void *memory);
/* NOLINTEND(bugprone-reserved-identifier) */

typedef int main_function(int argc, char **argv, char **environment);
typedef int start_function(main_function *of_program, int argc, char **argv, void (*init)(void),
                           void (*fini)(void), void (*rtld_fini)(void), void *stack_end);

static struct fail_control *control;
static main_function *main_of_program;
static atomic_bool has_returned; /* main has */
static atomic_long blocks;       /* of memory that somebody has */

__attribute__((constructor)) static void map_control(void)
{
    const char *path = getenv(FAIL_CONTROL_VARIABLE);
    if (!path) {
        return;
    }
    int fd = (int)syscall(SYS_openat, AT_FDCWD, path, O_RDWR | O_CLOEXEC, 0);
    if (fd < 0) {
        return;
    }
    void *mapped = (void *)syscall(SYS_mmap, NULL, sizeof *control, PROT_READ | PROT_WRITE,
                                   MAP_SHARED, fd, 0L);
    (void)syscall(SYS_close, fd);
    control = mapped == MAP_FAILED ? NULL : mapped;
}

static int run_main(int argc, char **argv, char **environment)
{
    int exit_code = main_of_program(argc, argv, environment);
    atomic_store(&has_returned, true);
    return exit_code;
}

/* What a program's first instructions call, in the C library's place. */
/* NOLINTBEGIN(bugprone-reserved-identifier): glibc's name */
int __libc_start_main(main_function *of_program, int argc, char **argv, void (*init)(void),
                      void (*fini)(void), void (*rtld_fini)(void), void *stack_end)
{
    start_function *start = NULL;
    /* A pointer to a function, which C does not make of one to an object. */
    *(void **)&start = dlsym(RTLD_NEXT, "__libc_start_main");
    main_of_program = of_program;
    return start(run_main, argc, argv, init, fini, rtld_fini, stack_end);
}
/* NOLINTEND(bugprone-reserved-identifier) */

/* Behind all that the program does itself, when it ends by exit or from main. */
__attribute__((destructor)) static void tell_what_is_left(void)
{
    if (control) {
        atomic_store(&control->blocks_left, atomic_load(&blocks));
    }
}

static void copy_name(char *to, size_t size, const char *from)
{
    size_t length = from ? strnlen(from, size - 1) : 0;
    memcpy(to, from ? from : "", length);
    to[length] = '\0';
}

static void note_site(const char *call, const void *site)
{
    Dl_info info = {0};
    copy_name(control->call, sizeof control->call, call);
    if (dladdr(site, &info) != 0 && info.dli_fname) {
        const char *slash = strrchr(info.dli_fname, '/');
        copy_name(control->module, sizeof control->module, slash ? slash + 1 : info.dli_fname);
        copy_name(control->symbol, sizeof control->symbol, info.dli_sname);
        control->offset = (uint64_t)((const char *)site - (const char *)info.dli_fbase);
    }
    atomic_store(&control->is_injected, true);
}

/* Whether LMDB itself calls, and on the file that is meant. */
static bool is_meant(int fd, const void *site)
{
    char link[32];
    char path[4096];
    Dl_info info = {0};
    (void)snprintf(link, sizeof link, "/proc/self/fd/%d", fd); /* it fits, and takes no memory */
    ssize_t length = readlink(link, path, sizeof path);
    size_t wanted = strlen(control->only_on);
    return length >= (ssize_t)wanted &&
           memcmp(path + length - (ssize_t)wanted, control->only_on, wanted) == 0 &&
           dladdr(site, &info) != 0 && info.dli_fname && strstr(info.dli_fname, "liblmdb");
}

/* Whether this call is the one to fail; errno is set then. */
static bool fails(enum fail_kind kind, const char *call, const void *site)
{
    if (!control || !atomic_load(&control->is_armed) || atomic_load(&has_returned) ||
        atomic_load(&control->kind) != kind || atomic_fetch_sub(&control->left, 1) != 0) {
        return false;
    }
    note_site(call, site);
    errno = atomic_load(&control->error);
    return true;
}

#define FAILS(kind, call) fails(kind, call, __builtin_return_address(0))

/* --- memory ---------------------------------------------------------------------------------- */

static void *count_block(void *memory)
{
    if (memory) {
        (void)atomic_fetch_add(&blocks, 1);
    }
    return memory;
}

void *malloc(size_t size)
{
    return FAILS(FAIL_MALLOC, "malloc") ? NULL : count_block(__libc_malloc(size));
}

void *calloc(size_t count, size_t size)
{
    return FAILS(FAIL_MALLOC, "calloc") ? NULL : count_block(__libc_calloc(count, size));
}

/* One that becomes a block, or is one no more, counts; glibc gives back what is made as small as 0.
 */
void *realloc(void *memory, size_t size)
{
    if (FAILS(FAIL_MALLOC, "realloc")) {
        return NULL;
    }
    void *moved = __libc_realloc(memory, size);
    if (!memory) {
        (void)count_block(moved);
    } else if (size == 0) {
        (void)atomic_fetch_sub(&blocks, 1);
    }
    return moved;
}

void free(void *memory)
{
    if (memory) {
        (void)atomic_fetch_sub(&blocks, 1);
    }
    __libc_free(memory);
}

void *aligned_alloc(size_t alignment, size_t size)
{
    return FAILS(FAIL_MALLOC, "aligned_alloc") ? NULL
                                               : count_block(__libc_memalign(alignment, size));
}

int posix_memalign(void **ret_memory, size_t alignment, size_t size)
{
    void *memory = FAILS(FAIL_MALLOC, "posix_memalign") ? NULL : __libc_memalign(alignment, size);
    if (!memory) {
        return ENOMEM;
    }
    *ret_memory = count_block(memory);
    return 0;
}

void *mmap(void *at, size_t size, int protection, int flags, int fd, off_t offset)
{
    if (FAILS(FAIL_MMAP, "mmap")) {
        return MAP_FAILED;
    }
    return (void *)syscall(SYS_mmap, at, size, protection, flags, fd, offset);
}

void *mmap64(void *at, size_t size, int protection, int flags, int fd, off64_t offset)
{
    if (FAILS(FAIL_MMAP, "mmap")) {
        return MAP_FAILED;
    }
    return (void *)syscall(SYS_mmap, at, size, protection, flags, fd, offset);
}

/* --- writing --------------------------------------------------------------------------------- */

static bool write_fails(int fd, const char *call, const void *site)
{
    struct stat status;
    if (!control || !atomic_load(&control->is_armed) || fd == STDOUT_FILENO ||
        fd == STDERR_FILENO) {
        return false;
    }
    int kept = errno;
    bool is_known = fstat(fd, &status) == 0;
    errno = kept;
    if (!is_known || (!S_ISREG(status.st_mode) && !S_ISSOCK(status.st_mode))) {
        return false;
    }
    if (!fails(FAIL_WRITE, call, site) && !fails(FAIL_WRITE_BADLY, call, site)) {
        return false;
    }
    if (S_ISSOCK(status.st_mode)) {
        errno = EPIPE;
    }
    return true;
}

#define WRITE_FAILS(fd, call) write_fails(fd, call, __builtin_return_address(0))

ssize_t write(int fd, const void *bytes, size_t size)
{
    return WRITE_FAILS(fd, "write") ? -1 : syscall(SYS_write, fd, bytes, size);
}

ssize_t writev(int fd, const struct iovec *parts, int count)
{
    return WRITE_FAILS(fd, "writev") ? -1 : syscall(SYS_writev, fd, parts, count);
}

ssize_t pwrite(int fd, const void *bytes, size_t size, off_t offset)
{
    return WRITE_FAILS(fd, "pwrite") ? -1 : syscall(SYS_pwrite64, fd, bytes, size, offset);
}

ssize_t pwrite64(int fd, const void *bytes, size_t size, off64_t offset)
{
    return WRITE_FAILS(fd, "pwrite") ? -1 : syscall(SYS_pwrite64, fd, bytes, size, offset);
}

/* The offset goes in two halves, of which the second is for machines of 32 bits. */
ssize_t pwritev(int fd, const struct iovec *parts, int count, off_t offset)
{
    return WRITE_FAILS(fd, "pwritev") ? -1 : syscall(SYS_pwritev, fd, parts, count, offset, 0L);
}

ssize_t pwritev64(int fd, const struct iovec *parts, int count, off64_t offset)
{
    return WRITE_FAILS(fd, "pwritev") ? -1 : syscall(SYS_pwritev, fd, parts, count, offset, 0L);
}

static bool sync_fails(int fd, const char *call, const void *site)
{
    bool is_armed = control && atomic_load(&control->is_armed);
    return is_armed && (control->only_on[0] == '\0' || is_meant(fd, site)) &&
           fails(FAIL_SYNC, call, site);
}

#define SYNC_FAILS(fd, call) sync_fails(fd, call, __builtin_return_address(0))

int fdatasync(int fd)
{
    return SYNC_FAILS(fd, "fdatasync") ? -1 : (int)syscall(SYS_fdatasync, fd);
}

int fsync(int fd)
{
    return SYNC_FAILS(fd, "fsync") ? -1 : (int)syscall(SYS_fsync, fd);
}

int msync(void *at, size_t size, int flags)
{
    return FAILS(FAIL_SYNC, "msync") ? -1 : (int)syscall(SYS_msync, at, size, flags);
}

/* --- opening --------------------------------------------------------------------------------- */

#define MODE_OF(flags, mode)                                                                       \
    do {                                                                                           \
        if ((flags) & (O_CREAT | O_TMPFILE)) {                                                     \
            va_list rest;                                                                          \
            va_start(rest, flags);                                                                 \
            (mode) = va_arg(rest, mode_t);                                                         \
            va_end(rest);                                                                          \
        }                                                                                          \
    } while (0)

int open(const char *path, int flags, ...)
{
    mode_t mode = 0;
    MODE_OF(flags, mode);
    return FAILS(FAIL_OPEN, "open") ? -1 : (int)syscall(SYS_openat, AT_FDCWD, path, flags, mode);
}

int open64(const char *path, int flags, ...)
{
    mode_t mode = 0;
    MODE_OF(flags, mode);
    return FAILS(FAIL_OPEN, "open") ? -1 : (int)syscall(SYS_openat, AT_FDCWD, path, flags, mode);
}

int openat(int folder, const char *path, int flags, ...)
{
    mode_t mode = 0;
    MODE_OF(flags, mode);
    return FAILS(FAIL_OPEN, "openat") ? -1 : (int)syscall(SYS_openat, folder, path, flags, mode);
}

int openat64(int folder, const char *path, int flags, ...)
{
    mode_t mode = 0;
    MODE_OF(flags, mode);
    return FAILS(FAIL_OPEN, "openat") ? -1 : (int)syscall(SYS_openat, folder, path, flags, mode);
}
