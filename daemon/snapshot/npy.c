#include "daemon/snapshot/npy.h"

#include <assert.h>
#include <errno.h>
#include <fcntl.h>
#include <stdio.h>
#include <string.h>
#include <sys/mman.h>
#include <unistd.h>

#include "daemon/snapshot/snapshot_file.h"

static const struct {
    const char *code;
    size_t bytes;
} TYPES[] = {[NPY_F4] = {"<f4", 4}, [NPY_I4] = {"<i4", 4}, [NPY_I8] = {"<i8", 8}};

_Static_assert(__BYTE_ORDER__ == __ORDER_LITTLE_ENDIAN__,
               "the numbers are written as they lie in memory, and the header says so");

size_t npy_number_bytes(enum npy_type type)
{
    return TYPES[type].bytes;
}

void npy_header_of(unsigned char header[NPY_HEADER_BYTES], const char *type, const char *shape)
{
    enum {
        PREFIX_BYTES = 10,
        TEXT_BYTES = NPY_HEADER_BYTES - PREFIX_BYTES
    };
    static const unsigned char PREFIX[PREFIX_BYTES] = {0x93, 'N', 'U', 'M',        'P',
                                                       'Y',  1,   0,   TEXT_BYTES, 0};
    char text[TEXT_BYTES + 1];
    int used = snprintf(text, sizeof text, "{'descr': '%s', 'fortran_order': False, 'shape': %s, }",
                        type, shape);
    assert(used > 0 && used < TEXT_BYTES); /* our own literals */
    memset(text + used, ' ', (size_t)(TEXT_BYTES - used));
    text[TEXT_BYTES - 1] = '\n';
    memcpy(header, PREFIX, sizeof PREFIX);
    memcpy(header + PREFIX_BYTES, text, TEXT_BYTES);
}

void npy_header(unsigned char header[NPY_HEADER_BYTES], enum npy_type type, uint64_t count)
{
    char shape[32];
    (void)snprintf(shape, sizeof shape, "(%llu,)", (unsigned long long)count); /* 20 digits */
    npy_header_of(header, TYPES[type].code, shape);
}

int npy_create(struct export_part *part, const char *name, enum npy_type type, uint64_t count,
               struct npy *ret_npy, struct store_error *error)
{
    struct npy npy = {.count = count, .fd = -1};
    npy.file_bytes = NPY_HEADER_BYTES + count * TYPES[type].bytes;
    int code = snapshot_file_open(part, name, &npy.fd, error);
    if (code != STORE_OK) {
        return code;
    }
    int errnum = posix_fallocate(npy.fd, 0, (off_t)npy.file_bytes);
    if (errnum == 0) {
        npy.map = mmap(NULL, npy.file_bytes, PROT_READ | PROT_WRITE, MAP_SHARED, npy.fd, 0);
        errnum = npy.map == MAP_FAILED ? errno : 0;
    }
    if (errnum != 0) {
        (void)close(npy.fd); /* nothing is in it yet */
        return snapshot_fail(error, name, errnum);
    }
    npy_header(npy.map, type, count);
    npy.data = (unsigned char *)npy.map + NPY_HEADER_BYTES;
    *ret_npy = npy;
    return STORE_OK;
}

void npy_close(struct npy *npy)
{
    if (npy->map) {
        (void)munmap(npy->map, npy->file_bytes); /* it was mapped so */
        (void)close(npy->fd);                    /* the part brings it to the disk */
        *npy = (struct npy){0};
    }
}
