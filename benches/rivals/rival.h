/* What the C rivals share: generator, clock, request and report. None of it is part of pastproof: rivals
 * are programs that its speed is compared with, written as well as we could write them.
 *
 * A rival is started with
 *
 *     L BETA WARM SWEEPS EVERY
 *
 * It starts an L x L torus (L even) with the lower bound all -1 and the upper bound all +1, makes WARM
 * sweeps, then SWEEPS sweeps on the clock, and takes the energies after each EVERY of them (0: never).
 * One number serves both bounds of a site. It prints
 *
 *     nanoseconds  NUMBER        that the SWEEPS sweeps took, measuring included
 *     energies     LOWER UPPER   a site, the means of what was measured
 *     error        NUMBER        the standard error of the upper one, from blocks
 *     differing    NUMBER        sites at which the bounds differ in the end */

#include <math.h>
#include <stdint.h>
#include <stdio.h>
#include <stdlib.h>
#include <time.h>

/* What a rival is; bound 0 is lower, 1 is upper. */
static int extent;
static void start(double beta);
static void sweep(void);
static int spin(int bound, int y, int x);

/* xoshiro256** 1.0 (D. Blackman, S. Vigna, ACM Trans. Math. Software 47, 36, 2021; from memory). */
static uint64_t state[4];

static inline uint64_t rotated(uint64_t word, int by) { return word << by | word >> (64 - by); }

static inline uint64_t next(void) {
    const uint64_t word = rotated(state[1] * 5, 7) * 9;
    const uint64_t shifted = state[1] << 17;
    state[2] ^= state[0];
    state[3] ^= state[1];
    state[1] ^= state[2];
    state[0] ^= state[3];
    state[2] ^= shifted;
    state[3] = rotated(state[3], 45);
    return word;
}

/* Output number `count` of SplitMix64 (G. L. Steele, D. Lea, C. H. Flood, OOPSLA 2014; from memory). */
static inline uint64_t split_mix(uint64_t count) {
    uint64_t z = (count + 1) * 0x9e3779b97f4a7c15;
    z = (z ^ z >> 30) * 0xbf58476d1ce4e5b9;
    z = (z ^ z >> 27) * 0x94d049bb133111eb;
    return z ^ z >> 31;
}

/* The heat-bath probability of +1 beside `plus` neighbours +1 and 4 - `plus` neighbours -1. */
static double probability(double beta, int plus) { return 1 / (1 + exp(-2 * beta * (2 * plus - 4))); }

static double energy_per_site(int bound) {
    long sum = 0;
    for (int y = 0; y < extent; y++)
        for (int x = 0; x < extent; x++)
            sum -= spin(bound, y, x) * (spin(bound, y, (x + 1) % extent) + spin(bound, (y + 1) % extent, x));
    return (double)sum / extent / extent;
}

enum { BLOCKS = 32 };

int main(int count, char **arguments) {
    if (count != 6) {
        fprintf(stderr, "usage: L BETA WARM SWEEPS EVERY\n");
        return 2;
    }
    extent = atoi(arguments[1]);
    const long warm = atol(arguments[3]), sweeps = atol(arguments[4]), every = atol(arguments[5]);
    const long block = every ? sweeps / every / BLOCKS : 0;
    double lower = 0, upper[BLOCKS] = {0};
    for (int i = 0; i < 4; i++) state[i] = split_mix(20261201 + i);
    start(atof(arguments[2]));
    for (long i = 0; i < warm; i++) sweep();

    struct timespec before, after;
    clock_gettime(CLOCK_MONOTONIC, &before);
    for (long i = 0, measured = 0; i < sweeps; i++) {
        sweep();
        if (block && (i + 1) % every == 0 && measured < block * BLOCKS) {
            lower += energy_per_site(0) / (block * BLOCKS);
            upper[measured++ / block] += energy_per_site(1) / block;
        }
    }
    clock_gettime(CLOCK_MONOTONIC, &after);

    double mean = 0, squares = 0;
    for (int i = 0; i < BLOCKS; i++) mean += upper[i] / BLOCKS;
    for (int i = 0; i < BLOCKS; i++) squares += (upper[i] - mean) * (upper[i] - mean);
    long differing = 0;
    for (int y = 0; y < extent; y++)
        for (int x = 0; x < extent; x++) differing += spin(0, y, x) != spin(1, y, x);
    printf("nanoseconds %.0f\n", (after.tv_sec - before.tv_sec) * 1e9 + (after.tv_nsec - before.tv_nsec));
    printf("energies %.9f %.9f\n", lower, mean);
    printf("error %.9f\n", sqrt(squares / (BLOCKS - 1) / BLOCKS));
    printf("differing %ld\n", differing);
    return 0;
}
