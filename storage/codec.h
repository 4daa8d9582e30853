/*
 * codec: numbers and byte strings into records and back. Little-endian with lengths in front; keys
 * big-endian, so that they sort as numbers do.
 */
#ifndef UNDERTAG_CODEC_H
#define UNDERTAG_CODEC_H

#include <stdbool.h>
#include <stddef.h>
#include <stdint.h>

/* A growing record. Zero-initialised is empty. */
struct codec_writer {
    unsigned char *data;
    size_t size;
    size_t capacity;
    bool failed; /* out of memory: everything put since is missing */
};

/* Empties the record and keeps its memory. */
void codec_reset(struct codec_writer *writer);
void codec_deinit(struct codec_writer *writer);

void codec_put_u8(struct codec_writer *writer, uint8_t value);
void codec_put_u32(struct codec_writer *writer, uint32_t value);
void codec_put_u64(struct codec_writer *writer, uint64_t value);
void codec_put_f32(struct codec_writer *writer, float value);
void codec_put_f64(struct codec_writer *writer, double value);
/* The length (32 bits), then the bytes. */
void codec_put_blob(struct codec_writer *writer, const void *data, size_t size);
/* The bytes alone. */
void codec_put_raw(struct codec_writer *writer, const void *data, size_t size);

/* A record being read. `failed` is set by the first read beyond its end, which then gives zeros. */
struct codec_reader {
    const unsigned char *data;
    size_t size;
    size_t at;
    bool failed;
};

uint8_t codec_get_u8(struct codec_reader *reader);
uint32_t codec_get_u32(struct codec_reader *reader);
uint64_t codec_get_u64(struct codec_reader *reader);
float codec_get_f32(struct codec_reader *reader);
double codec_get_f64(struct codec_reader *reader);
/* Points into the record. */
const char *codec_get_blob(struct codec_reader *reader, size_t *ret_size);

/* Big-endian, for keys. */
void codec_key_u32(unsigned char key[4], uint32_t value);
void codec_key_u64(unsigned char key[8], uint64_t value);
uint32_t codec_u32_of_key(const void *key);
uint64_t codec_u64_of_key(const void *key);

/* CRC-32 (ISO 3309). */
uint32_t codec_checksum(const void *data, size_t size);

/* The same of two pieces, one behind the other. */
uint32_t codec_checksum_of_two(const void *first, size_t first_size, const void *second,
                               size_t second_size);

#endif
