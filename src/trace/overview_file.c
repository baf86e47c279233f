/*
 * overview_file.c - an overview kept beside the case.
 *
 * A header (magic, byte order, version, the recording's digest, samples of each channel), the
 * blocks as pairs of floats, and the BLAKE2b-256 of all that. Read back only when every byte is
 * as it was written for exactly this recording; else it is as if it were not there.
 */
#include <string.h>

#include "trace/overview_impl.h"

static const char magic[8] = "INCOVER1";
enum { BYTE_ORDER_MARK = 0x01020304 };

struct head {
    char magic[8];
    uint32_t order, block, fan, levels;
    char digest[64];
    uint64_t channels, blocks;
};

static struct head make_head(const struct overview *overview)
{
    struct head head = {.order = BYTE_ORDER_MARK,
                        .block = OVERVIEW_BLOCK,
                        .fan = OVERVIEW_FAN,
                        .levels = OVERVIEW_LEVELS,
                        .channels = overview->channel_count,
                        .blocks = overview->block_count};
    memcpy(head.magic, magic, sizeof magic);
    memcpy(head.digest, overview->digest, sizeof head.digest);
    return head;
}

static size_t file_size(const struct overview *overview)
{
    return sizeof(struct head) + overview->channel_count * sizeof(int64_t) +
           overview->block_count * sizeof(struct extremes) + DIGEST_SIZE;
}

static bool fits(const struct overview *overview, const struct mapped *mapped)
{
    struct head head = make_head(overview);
    if (mapped->size != file_size(overview) || memcmp(mapped->data, &head, sizeof head) != 0)
        return false;
    const uint8_t *at = mapped->data + sizeof head;
    for (size_t i = 0; i < overview->channel_count; i++, at += sizeof(int64_t)) {
        if (memcmp(at, &overview->channels[i].samples, sizeof(int64_t)) != 0)
            return false;
    }
    uint8_t digest[DIGEST_SIZE];
    digest_bytes(mapped->data, mapped->size - DIGEST_SIZE, digest);
    return memcmp(digest, mapped->data + mapped->size - DIGEST_SIZE, DIGEST_SIZE) == 0;
}

bool overview_file_load(struct overview *overview)
{
    struct mapped mapped;
    if (disk_files.map(&disk_files, overview->path, &mapped, NULL))
        return false;
    bool good = fits(overview, &mapped);
    if (good)
        memcpy(overview->blocks,
               mapped.data + sizeof(struct head) + overview->channel_count * sizeof(int64_t),
               overview->block_count * sizeof *overview->blocks);
    disk_files.unmap(&disk_files, &mapped);
    return good;
}

/* Writes and digests the same bytes. */
static void put(struct outfile *out, struct digester *digester, const void *data, size_t size)
{
    outfile_write(out, data, size);
    digester_add(digester, data, size);
}

int overview_file_save(const struct overview *overview, struct err *err)
{
    struct outfile out;
    struct digester digester;
    uint8_t digest[DIGEST_SIZE];
    struct head head = make_head(overview);
    int failed = outfile_open(&out, overview->path, err);
    if (failed)
        return failed;
    digester_begin(&digester);
    put(&out, &digester, &head, sizeof head);
    for (size_t i = 0; i < overview->channel_count; i++)
        put(&out, &digester, &overview->channels[i].samples, sizeof(int64_t));
    put(&out, &digester, overview->blocks, overview->block_count * sizeof *overview->blocks);
    digester_end(&digester, digest);
    outfile_write(&out, digest, sizeof digest);
    return outfile_commit(&out, err);
}
