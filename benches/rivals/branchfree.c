/* The same without branches and without floating point: thresholds of 64 bits, bytes 0 and 1 in compact
 * sublattices, and one loop that draws a word and decides both bounds of a site with it. */

#include "sublattices.h"

static uint64_t thresholds[5];

static void start(double beta) {
    for (int plus = 0; plus <= 4; plus++) thresholds[plus] = ldexp(probability(beta, plus), 64);
    start_sublattices();
}

static void sweep(void) {
    for (int colour = 0; colour < 2; colour++) {
        for (int y = 0; y < extent; y++) {
            const int side = sideways(colour, y);
            const uint8_t *const lower = row_of(0, 1 - colour, y), *const upper = row_of(1, 1 - colour, y);
            uint8_t *const new_lower = row_of(0, colour, y), *const new_upper = row_of(1, colour, y);
            for (int j = 0; j < half; j++) {
                const uint64_t word = next();
                new_lower[j] = word < thresholds[lower[j - stride] + lower[j] + lower[j + stride] + lower[j + side]];
                new_upper[j] = word < thresholds[upper[j - stride] + upper[j] + upper[j + stride] + upper[j + side]];
            }
            carry(0, colour, y);
            carry(1, colour, y);
        }
    }
}
