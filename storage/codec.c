#include "storage/codec.h"

#include <endian.h>
#include <libdeflate.h>
#include <stdlib.h>
#include <string.h>

void codec_reset(struct codec_writer *writer)
{
    writer->size = 0;
    writer->failed = false;
}

void codec_deinit(struct codec_writer *writer)
{
    free(writer->data);
    memset(writer, 0, sizeof *writer);
}

void codec_put_raw(struct codec_writer *writer, const void *data, size_t size)
{
    if (writer->failed || size == 0) {
        return;
    }
    if (size > writer->capacity - writer->size) {
        size_t wanted = (writer->size + size) * 2;
        unsigned char *grown = realloc(writer->data, wanted);
        if (!grown) {
            writer->failed = true;
            return;
        }
        writer->data = grown;
        writer->capacity = wanted;
    }
    memcpy(writer->data + writer->size, data, size);
    writer->size += size;
}

void codec_put_u8(struct codec_writer *writer, uint8_t value)
{
    codec_put_raw(writer, &value, sizeof value);
}

void codec_put_u32(struct codec_writer *writer, uint32_t value)
{
    value = htole32(value);
    codec_put_raw(writer, &value, sizeof value);
}

void codec_put_u64(struct codec_writer *writer, uint64_t value)
{
    value = htole64(value);
    codec_put_raw(writer, &value, sizeof value);
}

void codec_put_f32(struct codec_writer *writer, float value)
{
    uint32_t bits = 0;
    memcpy(&bits, &value, sizeof bits);
    codec_put_u32(writer, bits);
}

void codec_put_f64(struct codec_writer *writer, double value)
{
    uint64_t bits = 0;
    memcpy(&bits, &value, sizeof bits);
    codec_put_u64(writer, bits);
}

void codec_put_blob(struct codec_writer *writer, const void *data, size_t size)
{
    codec_put_u32(writer, (uint32_t)size);
    codec_put_raw(writer, data, size);
}

/* The next `size` bytes, or NULL beyond the end. */
static const unsigned char *take(struct codec_reader *reader, size_t size)
{
    if (reader->failed || size > reader->size - reader->at) {
        reader->failed = true;
        return NULL;
    }
    const unsigned char *taken = reader->data + reader->at;
    reader->at += size;
    return taken;
}

uint8_t codec_get_u8(struct codec_reader *reader)
{
    const unsigned char *from = take(reader, 1);
    return from ? *from : 0;
}

uint32_t codec_get_u32(struct codec_reader *reader)
{
    uint32_t value = 0;
    const unsigned char *from = take(reader, sizeof value);
    if (from) {
        memcpy(&value, from, sizeof value);
    }
    return le32toh(value);
}

uint64_t codec_get_u64(struct codec_reader *reader)
{
    uint64_t value = 0;
    const unsigned char *from = take(reader, sizeof value);
    if (from) {
        memcpy(&value, from, sizeof value);
    }
    return le64toh(value);
}

float codec_get_f32(struct codec_reader *reader)
{
    uint32_t bits = codec_get_u32(reader);
    float value = 0.0F;
    memcpy(&value, &bits, sizeof value);
    return value;
}

double codec_get_f64(struct codec_reader *reader)
{
    uint64_t bits = codec_get_u64(reader);
    double value = 0.0;
    memcpy(&value, &bits, sizeof value);
    return value;
}

const char *codec_get_blob(struct codec_reader *reader, size_t *ret_size)
{
    size_t size = codec_get_u32(reader);
    const unsigned char *from = take(reader, size);
    *ret_size = from ? size : 0;
    return from ? (const char *)from : "";
}

void codec_key_u32(unsigned char key[4], uint32_t value)
{
    value = htobe32(value);
    memcpy(key, &value, sizeof value);
}

void codec_key_u64(unsigned char key[8], uint64_t value)
{
    value = htobe64(value);
    memcpy(key, &value, sizeof value);
}

uint32_t codec_u32_of_key(const void *key)
{
    uint32_t value = 0;
    memcpy(&value, key, sizeof value);
    return be32toh(value);
}

uint64_t codec_u64_of_key(const void *key)
{
    uint64_t value = 0;
    memcpy(&value, key, sizeof value);
    return be64toh(value);
}

uint32_t codec_checksum(const void *data, size_t size)
{
    return libdeflate_crc32(0, data, size);
}

uint32_t codec_checksum_of_two(const void *first, size_t first_size, const void *second,
                               size_t second_size)
{
    return libdeflate_crc32(codec_checksum(first, first_size), second, second_size);
}
