/*
 * main.c - the commands table and the way in.
 */
#include "command/command.h"

const struct command *const commands[] = {NULL};

int main(void)
{
    return EXIT_FAILED;
}
