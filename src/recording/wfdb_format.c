/*
 * wfdb_format.c - one sample out of packed bytes. Knows no header.
 */
#include "recording/wfdb_format.h"

bool wfdb_format_known(int format)
{
    switch (format) {
    case 8:
    case 16:
    case 24:
    case 32:
    case 61:
    case 80:
    case 160:
    case 212:
    case 310:
    case 311:
        return true;
    default:
        return false;
    }
}

/* Of a group that is cut off, the samples that are whole. */
static int64_t in_groups(size_t size, size_t group, const size_t *needs, int64_t of)
{
    int64_t count = (int64_t)(size / group) * of;
    size_t rest = size % group;
    for (int64_t i = 0; i < of && rest >= needs[i]; i++)
        count++;
    return count;
}

int64_t wfdb_format_samples(int format, size_t size)
{
    static const size_t pair[] = {2, 3}, words[] = {2, 4, 4}, packed[] = {2, 3, 4};
    switch (format) {
    case 8:
    case 80:
        return (int64_t)size;
    case 16:
    case 61:
    case 160:
        return (int64_t)(size / 2);
    case 24:
        return (int64_t)(size / 3);
    case 32:
        return (int64_t)(size / 4);
    case 212:
        return in_groups(size, 3, pair, 2);
    case 310:
        return in_groups(size, 4, words, 3);
    case 311:
        return in_groups(size, 4, packed, 3);
    default:
        return 0;
    }
}

static int32_t extend(uint32_t value, int bits)
{
    uint32_t sign = 1u << (bits - 1);
    value &= (sign << 1) - 1;
    return (int32_t)(value ^ sign) - (int32_t)sign;
}

static uint32_t word(const uint8_t *at)
{
    return (uint32_t)at[0] | (uint32_t)at[1] << 8;
}

static int32_t get_212(const uint8_t *bytes, int64_t index)
{
    const uint8_t *at = bytes + index / 2 * 3;
    return index % 2 == 0 ? extend(at[0] | (at[1] & 0x0Fu) << 8, 12)
                          : extend(at[2] | (at[1] & 0xF0u) << 4, 12);
}

static int32_t get_310(const uint8_t *bytes, int64_t index)
{
    const uint8_t *at = bytes + index / 3 * 4;
    if (index % 3 == 0)
        return extend(word(at) >> 1, 10);
    if (index % 3 == 1)
        return extend(word(at + 2) >> 1, 10);
    return extend((word(at) >> 11 & 0x1F) | (word(at + 2) >> 11 & 0x1F) << 5, 10);
}

static int32_t get_311(const uint8_t *bytes, int64_t index)
{
    const uint8_t *at = bytes + index / 3 * 4;
    switch (index % 3) {
    case 0:
        return extend(word(at), 10);
    case 1:
        return extend((uint32_t)at[1] >> 2 | (uint32_t)at[2] << 6, 10);
    default:
        return extend((uint32_t)at[2] >> 4 | (uint32_t)at[3] << 4, 10);
    }
}

int32_t wfdb_format_get(int format, const uint8_t *bytes, int64_t index)
{
    const uint8_t *two = bytes + 2 * index;
    switch (format) {
    case 8:
        return extend(bytes[index], 8);
    case 80:
        return (int32_t)bytes[index] - 128;
    case 16:
        return extend(word(two), 16);
    case 61:
        return extend((uint32_t)two[0] << 8 | two[1], 16);
    case 160:
        return (int32_t)word(two) - 32768;
    case 24:
        return extend(word(bytes + 3 * index) | (uint32_t)bytes[3 * index + 2] << 16, 24);
    case 32:
        return (int32_t)(word(bytes + 4 * index) | word(bytes + 4 * index + 2) << 16);
    case 212:
        return get_212(bytes, index);
    case 310:
        return get_310(bytes, index);
    default:
        return get_311(bytes, index);
    }
}

bool wfdb_format_missing(int format, int32_t *value)
{
    /* The marks of 24, 32, 80, 212, 310 and 311 are from memory: the guide leaves them open, the
     * lowest value of each is what is met. */
    switch (format) {
    case 16:
    case 61:
    case 160:
        *value = -32768;
        return true;
    case 24:
        *value = -8388608;
        return true;
    case 32:
        *value = INT32_MIN;
        return true;
    case 80:
        *value = -128;
        return true;
    case 212:
        *value = -2048;
        return true;
    case 310:
    case 311:
        *value = -512;
        return true;
    default:
        return false;
    }
}
