/* As far as a compiler takes bytes: every loop is vectorised (`cc -fopt-info-vec` says so). Numbers of 32
 * bits come from a counter (SplitMix64), a block at a time. A number's rank is how many of the thresholds
 * do not lie above it; as thresholds grow with the neighbours, a site becomes +1 exactly if it has at least
 * as many neighbours +1 as its rank, in either bound. */

#include "sublattices.h"

enum { BLOCK = 4096 };

static uint32_t thresholds[5];
static uint64_t counter;
static union {
    uint64_t words[BLOCK / 2];
    uint32_t halves[BLOCK];
} numbers;
static uint8_t ranks[BLOCK];

static void start(double beta) {
    for (int plus = 0; plus <= 4; plus++) thresholds[plus] = ldexp(probability(beta, plus), 32);
    start_sublattices();
}

static void draw_ranks(int count) {
    const uint32_t t0 = thresholds[0], t1 = thresholds[1], t2 = thresholds[2], t3 = thresholds[3], t4 = thresholds[4];
    const int words = (count + 1) / 2;
    for (int i = 0; i < words; i++) numbers.words[i] = split_mix(counter + i);
    counter += words;
    for (int i = 0; i < count; i++) {
        const uint32_t number = numbers.halves[i];
        ranks[i] = (number >= t0) + (number >= t1) + (number >= t2) + (number >= t3) + (number >= t4);
    }
}

static void decide(uint8_t *restrict new, const uint8_t *restrict other, int side, const uint8_t *restrict rank) {
    for (int j = 0; j < half; j++)
        new[j] = (uint8_t)(other[j - stride] + other[j] + other[j + stride] + other[j + side]) >= rank[j];
}

static void sweep(void) {
    const int rows = half < BLOCK ? BLOCK / half : 1;
    for (int colour = 0; colour < 2; colour++) {
        for (int first = 0; first < extent; first += rows) {
            const int last = first + rows < extent ? first + rows : extent;
            draw_ranks((last - first) * half);
            for (int y = first; y < last; y++)
                for (int bound = 0; bound < 2; bound++) {
                    const uint8_t *const rank = ranks + (y - first) * half;
                    decide(row_of(bound, colour, y), row_of(bound, 1 - colour, y), sideways(colour, y), rank);
                    carry(bound, colour, y);
                }
        }
    }
}
