/*
 * random.c - xoshiro256++, and normal numbers from it by Box and Muller.
 */
#include "random.h"

#include <math.h>

static uint64_t rotate(uint64_t x, int by)
{
    return (x << by) | (x >> (64 - by));
}

static uint64_t next(struct random *random)
{
    uint64_t *s = random->state, result = rotate(s[0] + s[3], 23) + s[0], t = s[1] << 17;
    s[2] ^= s[0];
    s[3] ^= s[1];
    s[1] ^= s[2];
    s[0] ^= s[3];
    s[2] ^= t;
    s[3] = rotate(s[3], 45);
    return result;
}

void random_seed(struct random *random, uint64_t seed, uint64_t stream)
{
    uint64_t x = seed ^ (stream * 0xd1342543de82ef95u);
    for (int i = 0; i < 4; i++) {
        x += 0x9e3779b97f4a7c15u;
        uint64_t z = (x ^ (x >> 30)) * 0xbf58476d1ce4e5b9u;
        z = (z ^ (z >> 27)) * 0x94d049bb133111ebu;
        random->state[i] = z ^ (z >> 31);
    }
}

double random_uniform(struct random *random, double low, double high)
{
    return low + (high - low) * (double)(next(random) >> 11) * 0x1p-53;
}

double random_normal(struct random *random)
{
    double u = 1.0 - random_uniform(random, 0, 1), v = random_uniform(random, 0, 1);
    return sqrt(-2.0 * log(u)) * cos(2.0 * M_PI * v);
}
