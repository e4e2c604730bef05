/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Random numbers. Everything hangs on the seed and the stream: no clock, no rand(). */
#ifndef UF_BASE_RANDOM_H
#define UF_BASE_RANDOM_H

#include <stdbool.h>
#include <stdint.h>

typedef struct uf_random {
    uint64_t state[4];
    double spare; /* the polar method makes normals in pairs */
    bool has_spare;
} uf_random;

/* splitmix64: steps `state` and returns the next number (Steele, Lea and Flood 2014, OOPSLA, "Fast splittable
 * pseudorandom number generators"). It only spreads seeds here: neighbouring seeds give unlike states. */
uint64_t uf_splitmix64(uint64_t *state);

/* Starts the generator. Different streams of one seed, and different seeds, are unrelated sequences. */
void uf_random_start(uf_random *random, uint64_t seed, uint64_t stream);

/* xoshiro256**, period 2^256 - 1 (Blackman and Vigna 2021, ACM Trans. Math. Softw. 47:36). */
uint64_t uf_random_bits(uf_random *random);

/* Uniform on the open interval (0, 1): the centres of 2^52 equal cells, so that its log always exists. */
double uf_random_uniform(uf_random *random);

/* Uniform between two numbers, and uniform whole number low .. high with both ends (low <= high). */
double uf_random_between(uf_random *random, double low, double high);
int uf_random_whole(uf_random *random, int low, int high);

/* Standard normal by the polar method (Marsaglia and Bray 1964, SIAM Review 6:260); exact. */
double uf_random_normal(uf_random *random);

/*
 * Poisson count of the given mean; 0 for a mean of 0 or below. Three ways:
 *   below 10       products of uniforms (Knuth, The Art of Computer Programming, vol. 2, 3.4.1); exact.
 *   10 to 1e8      transformed rejection, PTRS (Hörmann 1993, Insurance Math. Econom. 12:39); exact up to
 *                  rounding in double: ln of the probability is off by at most 1e-6.
 *   beyond 1e8     rounded normal. Mean and variance are right, the skewness 1/sqrt(mean), at most 1e-4, is
 *                  lost, and no distribution function value is off by more than 1e-5 (first Edgeworth term,
 *                  skewness / (6 sqrt(2 pi))). PTRS would lose more there to cancellation.
 */
double uf_random_poisson(uf_random *random, double mean);

#endif
