/*
 * random.h - the simulator's own random numbers: the same from the same seed on every machine.
 *
 * xoshiro256++ seeded by splitmix64 (Blackman & Vigna 2021, ACM TOMS 47:36). Each signal draws
 * from a stream of its own, so that a change to one leaves the others as they were.
 */
#ifndef DEMO_RANDOM_H
#define DEMO_RANDOM_H

#include <stdint.h>

struct random {
    uint64_t state[4];
};

void random_seed(struct random *random, uint64_t seed, uint64_t stream);
double random_uniform(struct random *random, double low, double high);
double random_normal(struct random *random); /* mean 0, deviation 1 */

#endif
