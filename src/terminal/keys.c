/*
 * keys.c - which keys are text.
 */
#include "terminal/keys.h"

bool key_is_text(uint32_t key)
{
    return key >= 0x20 && key < KEY_IS_LEFT && key != 0x7f && !(key >= 0x80 && key < 0xa0);
}
