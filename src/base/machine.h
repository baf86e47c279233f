/*
 * machine.h - which machine, which boot, which process: what tells a program that still runs from
 * one that does not any more, and the clock that never steps.
 *
 * Linux: /proc and CLOCK_BOOTTIME, which goes on during suspend and starts anew at boot; the boot
 * id tells one such start from another.
 */
#ifndef BASE_MACHINE_H
#define BASE_MACHINE_H

#include <stdbool.h>
#include <stdint.h>

#include "base/err.h"

enum { BOOT_ID_SIZE = 40, HOST_SIZE = 72, MACHINE_ID_SIZE = 17, RANDOM_ID_SIZE = 33 };

int64_t boottime_now_ns(void);

/* Texts of this machine and boot; "unknown" where the system does not say. */
void boot_id(char out[BOOT_ID_SIZE]);
void host_name(char out[HOST_SIZE]);

/* 16 digits that stay when the machine gets another name or is started again: a digest of what the
 * system keeps for that (/etc/machine-id, which is not for showing around), else of its name. */
void machine_id(char out[MACHINE_ID_SIZE]);

/* When a process was started, in clock ticks since boot: with the process id, no other process of
 * this boot has the same. 0 when there is no such process, or nothing left of it but its end, not
 * yet asked for. */
int64_t process_start_ticks(int64_t pid);

/* 128 random bits as 32 hexadecimal digits. */
void random_id(char out[RANDOM_ID_SIZE]);

#endif
