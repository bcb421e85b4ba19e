"""An independent reader of `pastproof stream 1`, from STREAM.md alone (its sections are named by §); plain, not fast.
Reads {seed, key?, law, graph?, held?, index, depth_limit} as JSON, or a list of these; prints what each one gives."""
import hashlib, json, struct, sys
from decimal import MAX_EMAX, MIN_EMIN, Context, Decimal
from fractions import Fraction
from functools import cache, partial
from itertools import count, product
from math import isqrt, lcm, prod

FULL, LOW, PCG = 1 << 128, (1 << 64) - 1, 0xDA942042E4DD58B5
sha = lambda bytes_: hashlib.sha256(bytes_).hexdigest()
canonical = lambda value: json.dumps(value, sort_keys=True, separators=(",", ":")).encode()  # §10; enough for laws
packed = lambda bits: sum(1 << i for i, x in enumerate(bits) if x > 0).to_bytes((len(bits) + 7) // 8, "little")  # §8
def generator(tally, seed, key, i, k, s):  # §1; tally counts the words
    digest = hashlib.sha256(b"pastproof stream 1\n" + seed + key + struct.pack("<QII", i, k, s)).digest()
    increment = (2 * int.from_bytes(digest[16:], "little") + 1) % FULL
    state = ((int.from_bytes(digest[:16], "little") + increment) * PCG + increment) % FULL
    while True:
        tally[0] += 1
        hi = ((state >> 64) ^ (state >> 96)) * PCG & LOW
        yield (hi ^ (hi >> 48)) * (state & LOW | 1) & LOW
        state = (state * PCG + increment) % FULL
lane = cache(lambda thetas: [{t >> 128 - m for t in thetas if t % (1 << 128 - m)} for m in range(129)])  # §3, undecided
def numbers(epoch, lanes, plain=False):  # §2, §3: U of each lane of one list, with 0 for digits not drawn
    for first in range(0, len(lanes), 512):
        group, strip, m = lanes[first : first + 512], epoch(first // 65536), 0
        u = [next(strip) << 64 | next(strip) if plain else 0 for _ in group]
        waiting = [] if plain else [j for j, mine in enumerate(group) if mine[0]]
        while waiting:
            words, m = [next(strip) for _ in range((len(group) + 63) // 64)], m + 1
            for j in waiting:
                u[j] |= (words[j // 64] >> j % 64 & 1) << 128 - m
            waiting = [j for j in waiting if u[j] >> 128 - m in group[j][m]]
        yield from u
def root(x, n):  # the rational n-th root of x, or None
    r = x if n == 1 else Fraction(*(isqrt(p) if n == 2 else round(p ** (1 / n)) for p in x.as_integer_ratio()))
    return r if r**n == x else None
def theta(of, law, x):  # §7: floor(of(w) * 2^128) for w = exp(-beta x) or (a + sqrt b)^(-x/c); `of` falls with w
    a, w = None, None
    if "critical" in (law.get("beta"), law.get("p")):
        ising = {"hypercubic": (1, 2, 2), "triangular": (3, 0, 4), "honeycomb": (2, 3, 2)}
        a, b, c = ising[law["lattice"]["kind"]] if law["law"] == "ising" else (1, law["q"], 1)
        w = None if (base := root(Fraction(b), 2)) is None else root(a + base, (x / c).denominator)
    x = x / c if a else x * Fraction(law["beta"])
    if x == 0 or w:
        return int(of(w ** -x.numerator if x else Fraction(1)) * FULL)
    x, digits, low, high = max(Fraction(-2000), min(Fraction(2000), x)), 90, 0, 1  # beyond 2000 no floor changes
    while low != high:
        near = Context(prec=digits, Emax=MAX_EMAX, Emin=MIN_EMIN)  # exp, ln and sqrt are correctly rounded
        log = near.ln(near.add(a, near.sqrt(near.divide(*Fraction(b).as_integer_ratio())))) if a else Decimal(1)
        w = Fraction(near.exp(near.multiply(near.divide(-x.numerator, x.denominator), log)))
        error = w * (abs(x) + 1) / 10 ** (digits - 20)  # far above what these roundings can add up to
        low, high, digits = int(of(w + error) * FULL), int(of(w - error) * FULL), 2 * digits
    return low
def edge_thresholds(law, coupling):  # §5: apart, joined
    q, p, factor = Fraction(law.get("q", 2)), law.get("p"), 1 if "potts" in (law["law"], law.get("convention")) else 2
    both, x = (lambda w: (1 - w) / (1 - w + q * w), lambda w: 1 - w), Fraction(1) if p else factor * Fraction(coupling)
    return [int(of(1 - Fraction(p)) * FULL) if p and p != "critical" else theta(of, law, x) for of in both]
def lattice(spec, graph):  # §9: number of sites, edges, ends of absent edges with their word (none if free)
    if spec["kind"] == "graph":
        assert spec["edges"] == len(graph["edges"]) and spec["sha256"] == sha(canonical(graph))
        return spec["sites"], graph["edges"], []
    size, boundary, two, edges, absent = spec["extents"], spec["boundary"], spec["kind"] == "honeycomb", [], []
    steps = [[int(a == axis) for a in range(len(size))] for axis in range(len(size))]
    steps = [[0, 0], [0, -1], [-1, 0]] if two else steps + [[1, 1]] * (spec["kind"] == "triangular")
    for cell, step in product(product(*map(range, size)), steps):
        moved = [x + s for x, s in zip(cell, step)]
        here, there = (sum(x % e * prod(size[a + 1 :]) for a, (x, e) in enumerate(zip(c, size))) for c in (cell, moved))
        ends = (2 * there + 1, 2 * here) if two else (here, there)
        words = [w for x, e, w in zip(moved, size, boundary) if not 0 <= x < e and w != "periodic"]
        absent += [(end, words[0]) for end in ends if words and words[0] != "free"]
        edges += [] if words else [ends]
    return prod(size) * (1 + two), edges, absent
def neighbours(n, edges, labels):
    far = [[] for _ in range(n)]
    for (a, b), label in zip(edges, labels):
        far[a].append((b, label)), far[b].append((a, label))
    return far
def colouring(free, far):  # §4: the lists of a sweep
    colour = {}
    for i in free:
        colour[i] = next(c for c in count() if c not in {colour.get(b) for b, _ in far[i]})
    return [[i for i in free if colour[i] == c] for c in sorted(set(colour.values()))]
def site_law(law, graph, held):  # §4: the bounds at the start, sweep, bytes of a state, colours
    n, edges, absent = lattice(law["lattice"], graph)
    edges, fixed = edges + [(i, n + (word == "minus")) for i, word in absent], {n: 1, n + 1: -1, **dict(held)}
    gas, plain = law["law"] == "lattice-gas", None in (law.get("coupling", "0"), law.get("field", "0"))
    j = [Fraction(x) for x in graph.get("couplings") or [-1 if gas else law["coupling"]] * len(edges)]
    h = [Fraction(x) for x in graph.get("fields") or [0 if gas else law["field"]] * n]
    z, falls, unit = Fraction(law.get("activity", 0)), "-" in law.get("beta", ""), lcm(*(x.denominator for x in j + h))
    far = neighbours(n + 2, edges, [int(x * unit) for x in j])
    @cache
    def heat(m):  # the local field in 1/unit; for the gas -2 * occupied neighbours
        return (not m) * int(z / (1 + z) * FULL) if gas else theta(lambda w: 1 / (1 + w), law, Fraction(2 * m, unit))
    def asked(i, values):
        return heat(int(h[i] * unit) + sum(x * s - gas for s, (_, x) in zip(values, far[i])))
    def ever(i):
        states = product(*([fixed[b]] if b in fixed else (-1, 1) for b, _ in far[i]))
        return None if plain else lane(frozenset(asked(i, values) for values in states))
    lists = [(sites, [ever(i) for i in sites]) for sites in colouring([i for i in range(n) if i not in fixed], far)]
    def sweep(epoch, bounds):
        for i, u in (pair for sites, lanes in lists for pair in zip(sites, numbers(epoch, lanes, plain))):
            ends = [asked(i, [bounds[side ^ falls ^ (x < 0)][b] for b, x in far[i]]) for side in (0, 1)]
            bounds[0][i], bounds[1][i] = (1 if u < end else -1 for end in ends)
    return [[fixed.get(i, s) for i in range(n + 2)] for s in (-1, 1)], sweep, lambda s: packed(s[:n]), None
def cluster(far, state, a, without=None):  # the vertices joined to a by open edges
    seen, front = {a}, [a]
    for v in front:
        front += (new := {b for b, e in far[v] if state[e] and e != without} - seen)
        seen |= new
    return seen
def edge_law(law, graph, _):  # §5: as site_law
    n, edges, absent = lattice(law["lattice"], graph)
    edges, known = edges + [(i, n) for i, _ in absent], cache(lambda coupling: edge_thresholds(law, coupling))
    far, outer = neighbours(n + 1, edges, range(len(edges))), int("plus" in law["lattice"].get("boundary", ()))
    thetas = [known(x) for x in graph.get("couplings") or [law.get("coupling", 1)] * len(edges)]
    lanes = [lane(frozenset(pair)) for pair in thetas]
    def sweep(epoch, bounds):
        for e, u in enumerate(numbers(epoch, lanes)):
            for state in bounds:
                state[e] = u < thetas[e][edges[e][1] in cluster(far, state, edges[e][0], e)]
    def colours(state, epoch):
        colour = dict.fromkeys(cluster(far, state, n), law.get("boundary_colour", outer))
        parts = dict.fromkeys(frozenset(cluster(far, state, v)) for v in range(n) if v not in colour)
        steps = [c * FULL // law.get("q", 2) for c in range(1, law.get("q", 2))]
        for part, u in zip(parts, numbers(epoch, [lane(frozenset(steps))] * len(parts))):
            colour |= dict.fromkeys(part, sum(step <= u for step in steps))
        return {"potts": bytes, "ising": packed}[law["law"]]([colour[v] for v in range(n)])
    return [[x] * len(edges) for x in (False, True)], sweep, packed, colours if law["law"] != "random-cluster" else None
def draw(case):  # §6
    law, graph, held, index = case["law"], case.get("graph") or {}, case.get("held") or [], case["index"]
    seed, key = bytes.fromhex(case["seed"]), bytes.fromhex(case.get("key") or sha(canonical(law)))
    assert law.get("held") == (sha(canonical(held)) if held else None), "other held values"
    start, sweep, raw, colours = (site_law if law["map"] == "site heat bath" else edge_law)(law, graph, held)
    for depth in range(case["depth_limit"] + 1):
        bounds, equal, tally = [list(state) for state in start], 0, [0]
        for k in range(depth, -1, -1):
            epoch = cache(partial(generator, tally, seed, key, index, k))
            for _ in range(max(1, 1 << k >> 1)):
                sweep(epoch, bounds)
                equal = equal + 1 if bounds[0] == bounds[1] else 0
        if equal:
            break
    bits = raw(bounds[0]) if equal else raw(bounds[0]) + raw(bounds[1])
    epoch = cache(partial(generator, [0], seed, key, index, 2**32 - 1))
    final = colours(bounds[0], epoch) if equal and colours else bits
    return {"depth": depth, "merged_at": max(0, equal - 1), "words": tally[0], "hash": sha(final),
            "bytes": final.hex() if equal else None, "bond_hash": sha(bits), "unfinished": not equal}
if __name__ == "__main__":
    print(json.dumps([draw(each) for each in case] if isinstance(case := json.load(sys.stdin), list) else draw(case)))
