/*
 * machine.c - asking Linux who we are. Changes nothing.
 */
#include "base/machine.h"

#include <sodium.h>
#include <stdio.h>
#include <string.h>
#include <time.h>
#include <unistd.h>

#include "base/file.h"
#include "base/ns.h"

int64_t boottime_now_ns(void)
{
    struct timespec now = {0};
    (void)clock_gettime(CLOCK_BOOTTIME, &now);
    return (int64_t)now.tv_sec * NS_PER_S + now.tv_nsec;
}

/* The first line of a small file of /proc; false when there is none. */
static bool first_line(const char *path, char *out, int size)
{
    FILE *file = fopen(path, "re");
    bool got = file && fgets(out, size, file);
    if (file)
        (void)fclose(file); /* read only: nothing to lose */
    if (got)
        out[strcspn(out, "\n")] = '\0';
    return got;
}

void boot_id(char out[BOOT_ID_SIZE])
{
    if (!first_line("/proc/sys/kernel/random/boot_id", out, BOOT_ID_SIZE))
        (void)snprintf(out, BOOT_ID_SIZE, "unknown");
}

void host_name(char out[HOST_SIZE])
{
    if (gethostname(out, HOST_SIZE) < 0)
        (void)snprintf(out, HOST_SIZE, "unknown");
    out[HOST_SIZE - 1] = '\0';
}

void machine_id(char out[MACHINE_ID_SIZE])
{
    char name[HOST_SIZE], text[DIGEST_TEXT_SIZE];
    uint8_t digest[DIGEST_SIZE];
    if (!first_line("/etc/machine-id", name, sizeof name) || !*name)
        host_name(name);
    digest_bytes(name, strlen(name), digest);
    digest_text(digest, text);
    (void)snprintf(out, MACHINE_ID_SIZE, "%.16s", text);
}

/* /proc/PID/stat: "pid (name) state ...", the start time is the 20th field after the name, which
 * may hold blanks and parentheses itself. */
int64_t process_start_ticks(int64_t pid)
{
    enum { FIELDS_AFTER_NAME = 20 };
    char path[64], line[1024];
    long long ticks = 0;
    (void)snprintf(path, sizeof path, "/proc/%lld/stat", (long long)pid);
    if (!first_line(path, line, sizeof line))
        return 0;
    const char *at = strrchr(line, ')');
    if (at && at[1] && strchr("ZX", at[2]))
        return 0;
    for (int field = 0; at && field < FIELDS_AFTER_NAME; field++)
        at = strchr(at + 1, ' ');
    return at && sscanf(at, "%lld", &ticks) == 1 ? ticks : 0;
}

void random_id(char out[RANDOM_ID_SIZE])
{
    uint8_t bytes[(RANDOM_ID_SIZE - 1) / 2];
    randombytes_buf(bytes, sizeof bytes);
    (void)sodium_bin2hex(out, RANDOM_ID_SIZE, bytes, sizeof bytes);
}
