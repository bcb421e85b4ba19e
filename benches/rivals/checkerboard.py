"""Heat bath of both bounds with numpy: compact sublattices, whole arrays at a time.

Started and answering like the C rivals (see rival.h). An array has the axes bound, row, column, with a rim
of one site that repeats what stands on the other side; nothing is allocated in a sweep.
"""

import sys
import time

import numpy as np

BLOCKS = 32


class Checkerboard:
    def __init__(self, extent, beta):
        self.extent, self.half = extent, extent // 2
        self.random = np.random.Generator(np.random.SFC64(20261201))
        self.table = 1 / (1 + np.exp(-2 * beta * (2 * np.arange(5) - 4)))
        rimmed = (2, extent + 2, self.half + 2)
        self.colours = [np.zeros(rimmed, np.int8), np.zeros(rimmed, np.int8)]
        for spins in self.colours:
            spins[1] = 1
        self.plus = np.empty((2, extent, self.half), np.int8)
        self.probability = np.empty((2, extent, self.half))
        self.uniform = np.empty((extent, self.half))

    def sweep(self):
        for colour in range(2):
            spins, other = self.colours[colour], self.colours[1 - colour]
            np.add(other[:, :-2, 1:-1], other[:, 2:, 1:-1], out=self.plus)
            self.plus += other[:, 1:-1, 1:-1]
            for odd in range(2):
                # beside a site of row y: the column after if y + colour is odd, else the one before
                first = 2 if (odd + colour) % 2 else 0
                self.plus[:, odd::2] += other[:, 1 + odd : -1 : 2, first : first + self.half]
            np.take(self.table, self.plus, out=self.probability, mode="clip")
            self.random.random(out=self.uniform)
            np.less(self.uniform, self.probability, out=spins[:, 1:-1, 1:-1], casting="unsafe")
            spins[:, :, 0], spins[:, :, -1] = spins[:, :, -2], spins[:, :, 1]
            spins[:, 0], spins[:, -1] = spins[:, -2], spins[:, 1]

    def spins(self):
        whole = np.empty((2, self.extent, self.extent), np.int8)
        for colour in range(2):
            for odd in range(2):
                whole[:, odd::2, (odd + colour) % 2 :: 2] = self.colours[colour][:, 1 + odd : -1 : 2, 1:-1]
        return 2 * whole - 1

    def energies(self):
        spins = self.spins()
        pairs = spins * (np.roll(spins, 1, 1) + np.roll(spins, 1, 2))
        return -pairs.mean((1, 2), dtype=float)


def main():
    extent, beta = int(sys.argv[1]), float(sys.argv[2])
    warm, sweeps, every = map(int, sys.argv[3:])
    board = Checkerboard(extent, beta)
    for _ in range(warm):
        board.sweep()
    measured = []
    before = time.monotonic_ns()
    for done in range(1, sweeps + 1):
        board.sweep()
        if every and done % every == 0:
            measured.append(board.energies())
    after = time.monotonic_ns()
    block = len(measured) // BLOCKS
    lower, mean, error = 0, 0, 0
    if block:
        blocks = np.reshape(measured[: block * BLOCKS], (BLOCKS, block, 2)).mean(1)
        lower, mean = blocks.mean(0)
        error = blocks[:, 1].std(ddof=1) / BLOCKS**0.5
    lower_spins, upper_spins = board.spins()
    print("nanoseconds", after - before)
    print(f"energies {lower:.9f} {mean:.9f}")
    print(f"error {error:.9f}")
    print("differing", (lower_spins != upper_spins).sum())


main()
