/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "base/random.h"

#include <math.h>

static uint64_t rotate_left(uint64_t x, int by)
{
    return (x << by) | (x >> (64 - by));
}

uint64_t uf_splitmix64(uint64_t *state)
{
    uint64_t z = *state += UINT64_C(0x9e3779b97f4a7c15);
    z = (z ^ (z >> 30)) * UINT64_C(0xbf58476d1ce4e5b9);
    z = (z ^ (z >> 27)) * UINT64_C(0x94d049bb133111eb);
    return z ^ (z >> 31);
}

void uf_random_start(uf_random *random, uint64_t seed, uint64_t stream)
{
    uint64_t mixer = seed;
    mixer = uf_splitmix64(&mixer) ^ stream * UINT64_C(0xd1342543de82ef95);
    *random = (uf_random){0};
    for (int k = 0; k < 4; k++)
        random->state[k] = uf_splitmix64(&mixer);
}

uint64_t uf_random_bits(uf_random *random)
{
    uint64_t *s = random->state;
    uint64_t result = rotate_left(s[1] * 5, 7) * 9;
    uint64_t t = s[1] << 17;
    s[2] ^= s[0];
    s[3] ^= s[1];
    s[1] ^= s[2];
    s[0] ^= s[3];
    s[2] ^= t;
    s[3] = rotate_left(s[3], 45);
    return result;
}

/* 52 bits, not 53: with the half added every value is exact, and the largest stays below 1. */
double uf_random_uniform(uf_random *random)
{
    return ((double)(uf_random_bits(random) >> 12) + 0.5) * 0x1p-52;
}

double uf_random_between(uf_random *random, double low, double high)
{
    return low + (high - low) * uf_random_uniform(random);
}

/* The unevenness of scaling 52 bits is below 1e-6 for any range of int. */
int uf_random_whole(uf_random *random, int low, int high)
{
    double range = (double)high - low + 1;
    return (int)(low + floor(range * uf_random_uniform(random)));
}

double uf_random_normal(uf_random *random)
{
    if (random->has_spare) {
        random->has_spare = false;
        return random->spare;
    }
    double u, v, square;
    do {
        u = 2 * uf_random_uniform(random) - 1;
        v = 2 * uf_random_uniform(random) - 1;
        square = u * u + v * v;
    } while (square >= 1 || square <= 0);
    double factor = sqrt(-2 * log(square) / square);
    random->spare = v * factor;
    random->has_spare = true;
    return u * factor;
}

/* ln k!, by table below 10, else by Stirling's series (Abramowitz and Stegun 6.1.41), good to 1e-10. The C
 * library's lgamma writes a global variable and is not for threads. */
static double log_factorial(double k)
{
    static const double small[10] = {1, 1, 2, 6, 24, 120, 720, 5040, 40320, 362880};
    if (k < 10)
        return log(small[(int)k]);
    double n = k + 1, i2 = 1 / (n * n);
    double series = (1.0 / 12 - i2 * (1.0 / 360 - i2 * (1.0 / 1260 - i2 / 1680))) / n;
    return (n - 0.5) * log(n) - n + 0.91893853320467274178 + series;
}

static double poisson_by_products(uf_random *random, double mean)
{
    double limit = exp(-mean), product = uf_random_uniform(random);
    double k = 0;
    for (; product > limit; k++)
        product *= uf_random_uniform(random);
    return k;
}

/* The constants, and the names a, b, us, v, are Hörmann's. Six draws of seven leave by the first return. */
static double poisson_by_rejection(uf_random *random, double mean)
{
    double b = 0.931 + 2.53 * sqrt(mean);
    double a = -0.059 + 0.02483 * b;
    double sure = 0.9277 - 3.6224 / (b - 2);
    for (;;) {
        double u = uf_random_uniform(random) - 0.5, v = uf_random_uniform(random);
        double us = 0.5 - fabs(u);
        double k = floor((2 * a / us + b) * u + mean + 0.43);
        if (us >= 0.07 && v <= sure)
            return k;
        if (k < 0 || (us < 0.013 && v > us))
            continue;
        double scale = 1.1239 + 1.1328 / (b - 3.4);
        if (log(v * scale / (a / (us * us) + b)) <= k * log(mean) - mean - log_factorial(k))
            return k;
    }
}

double uf_random_poisson(uf_random *random, double mean)
{
    if (!(mean > 0))
        return 0;
    if (mean < 10)
        return poisson_by_products(random, mean);
    if (mean <= 1e8)
        return poisson_by_rejection(random, mean);
    return floor(mean + sqrt(mean) * uf_random_normal(random) + 0.5);
}
