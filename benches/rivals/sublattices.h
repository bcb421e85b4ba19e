/* Bytes 0 and 1 in compact sublattices: site (y, x) is byte x / 2 of row y of colour (x + y) % 2. A rim
 * of one byte around each sublattice repeats what stands on the other side, so no index wraps.
 *
 * The neighbours of byte j of row y of one colour are, in the other colour, the bytes j of the rows
 * y - 1, y and y + 1, and in row y the byte j + 1 if y + colour is odd, else j - 1. */

#include <string.h>

#include "rival.h"

static int half, stride;
static uint8_t *bounds[2][2]; /* bound, colour */

static uint8_t *row_of(int bound, int colour, int y) { return bounds[bound][colour] + (size_t)(y + 1) * stride + 1; }

static int sideways(int colour, int y) { return (y + colour) % 2 ? 1 : -1; }

static void start_sublattices(void) {
    half = extent / 2;
    stride = half + 2;
    for (int bound = 0; bound < 2; bound++)
        for (int colour = 0; colour < 2; colour++) {
            bounds[bound][colour] = malloc((size_t)stride * (extent + 2));
            memset(bounds[bound][colour], bound, (size_t)stride * (extent + 2));
        }
}

/* Carries a finished row to the rim. */
static void carry(int bound, int colour, int y) {
    uint8_t *const row = row_of(bound, colour, y);
    row[-1] = row[half - 1];
    row[half] = row[0];
    if (y == 0) memcpy(row_of(bound, colour, extent) - 1, row - 1, stride);
    if (y == extent - 1) memcpy(row_of(bound, colour, -1) - 1, row - 1, stride);
}

static int spin(int bound, int y, int x) { return row_of(bound, (x + y) % 2, y)[x / 2] ? 1 : -1; }
