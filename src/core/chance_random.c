/* SPDX-License-Identifier: GPL-3.0-or-later */
/* xoshiro256++ (Blackman & Vigna, ACM TOMS 47(4):36, 2021) seeded by splitmix64 (Steele, Lea & Flood, OOPSLA
 * 2014), given to GSL as a generator of its own: GSL's generators take 32 bits of a seed only, too few to
 * keep the streams of (seed, stream) apart. */
#include "core/chance.h"

#include "core/memory.h"

#include <gsl/gsl_randist.h>
#include <gsl/gsl_rng.h>

struct lw_random {
    gsl_rng generator;
    uint64_t state[4];
};

static uint64_t mix(uint64_t *counter)
{
    uint64_t z = *counter += UINT64_C(0x9e3779b97f4a7c15);
    z = (z ^ z >> 30) * UINT64_C(0xbf58476d1ce4e5b9);
    z = (z ^ z >> 27) * UINT64_C(0x94d049bb133111eb);
    return z ^ z >> 31;
}

static void set(void *pointer, unsigned long seed)
{
    uint64_t *state = pointer, counter = seed;
    for (int i = 0; i < 4; i++) state[i] = mix(&counter);
}

static inline uint64_t rotate(uint64_t x, int bits)
{
    return x << bits | x >> (64 - bits);
}

static unsigned long get(void *pointer)
{
    uint64_t *s = pointer, result = rotate(s[0] + s[3], 23) + s[0], shifted = s[1] << 17;
    s[2] ^= s[0];
    s[3] ^= s[1];
    s[1] ^= s[2];
    s[0] ^= s[3];
    s[2] ^= shifted;
    s[3] = rotate(s[3], 45);
    return result;
}

static double get_double(void *pointer)
{
    return (double)(get(pointer) >> 11) * 0x1p-53;
}

static const gsl_rng_type xoshiro = {"xoshiro256++", UINT64_MAX, 0, sizeof(uint64_t[4]), set, get,
                                     get_double};

lw_status lw_random_new(uint64_t seed, uint64_t stream, lw_random **out, lw_error *error)
{
    *out = NULL;
    lw_random *random = LW_NEW(lw_random);
    if (random == NULL) return lw_fail_memory(error, "a random stream", sizeof *random);
    random->generator.type = &xoshiro;
    random->generator.state = random->state;
    uint64_t counter = seed, first = mix(&counter);
    counter = first ^ stream;
    set(random->state, mix(&counter));
    *out = random;
    return LW_OK;
}

void lw_random_free(lw_random *random)
{
    lw_free(random);
}

double lw_random_normal(lw_random *random)
{
    return gsl_ran_gaussian_ziggurat(&random->generator, 1.0);
}

double lw_random_uniform(lw_random *random)
{
    return gsl_rng_uniform(&random->generator);
}

double lw_random_sign(lw_random *random)
{
    return get(random->state) >> 63 ? -1.0 : 1.0;
}

uint64_t lw_random_below(lw_random *random, uint64_t count)
{
    return count > 1 ? gsl_rng_uniform_int(&random->generator, count) : 0;
}
