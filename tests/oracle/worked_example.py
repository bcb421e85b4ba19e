"""Prints section 11 of STREAM.md, the worked example, with all numbers computed here; `--check FILE` compares instead.

The trace follows sections 1 to 8 by steps of its own; of the reader beside this file it takes the thresholds and the
canonical JSON, and at the end it demands the reader's answers (check_vectors.py checks those against known ones).
"""
import hashlib
import sys
import textwrap
from pathlib import Path

sys.dont_write_bytecode = True
import stream1 as reader

SEED = bytes(range(32))
MULTIPLIER = 0xDA942042E4DD58B5
out = []


def say(*lines):
    out.extend(lines)


def prose(text):
    say(*textwrap.wrap(text, 108, break_long_words=False, break_on_hyphens=False), "")


def broken(text):
    """One long line of JSON as lines of at most 100 characters, each but the last ending with a comma or colon."""
    while len(text) > 100:
        cut = max(text.rindex(sign, 0, 100) for sign in ",:" if sign in text[:100]) + 1
        say("    " + text[:cut])
        text = text[cut:]
    say("    " + text)


def digest_of(key, i, k):
    address = i.to_bytes(8, "little") + k.to_bytes(4, "little") + bytes(4)
    return hashlib.sha256(b"pastproof stream 1\n" + SEED + key + address).digest()


def first_state(digest):
    increment = (2 * int.from_bytes(digest[16:], "little") + 1) % 2**128
    return ((int.from_bytes(digest[:16], "little") + increment) * MULTIPLIER + increment) % 2**128, increment


def words(key, i, k):
    state, increment = first_state(digest_of(key, i, k))
    while True:
        high, low = state // 2**64, state % 2**64 | 1
        high ^= high // 2**32
        high = high * MULTIPLIER % 2**64
        high ^= high // 2**48
        yield high * low % 2**64
        state = (state * MULTIPLIER + increment) % 2**128


def decided(digits, theta):
    """Yes or no to "U < theta" after these digits; None while it is undecided."""
    m = len(digits)
    known = int(digits or "0", 2)
    if theta in (0, 2**128):
        return theta != 0
    if known != theta // 2 ** (128 - m):
        return known < theta // 2 ** (128 - m)
    return None if theta % 2 ** (128 - m) else False


def drawn(source, thetas, names, indent="    "):
    """Draws the digits of one group, all of whose lanes have the thresholds `thetas`, and prints them."""
    digits, m = ["" for _ in names], 0
    say(f"{indent}m   word              " + "  ".join(f"{name:7}" for name in names).rstrip())
    while any(decided(u, theta) is None for u in digits for theta in thetas):
        word, m = next(source), m + 1
        digits = [u + str(word // 2**j % 2) for j, u in enumerate(digits)]
        say(f"{indent}{m}   {word:016x}  " + "  ".join(f"{u[-1]:7}" for u in digits).rstrip())
    say("")
    return digits


def answers(digits, thetas):
    return " ".join("yes" if decided(digits, theta) else "no " for theta in thetas)


def binary(theta):
    return f"{theta:0128b}"[:16]


def ising():
    law = {
        "law": "ising", "map": "site heat bath", "protocol": "doubling", "beta": "3/10", "coupling": "1", "field": "0",
        "held": None, "lattice": {"kind": "hypercubic", "extents": [4], "boundary": ["periodic"]},
    }  # fmt: skip
    text = reader.canonical(law)
    key = hashlib.sha256(text).digest()
    prose("**An Ising chain of four sites**, periodic, beta = 3/10, coupling 1, no field. The law object in canonical "
          "JSON, and the key, its SHA-256:")  # fmt: skip
    broken(text.decode())
    say("", "    key = " + key.hex(), "")
    prose("Edges 0, 1, 2, 3 join the sites 0-1, 1-2, 2-3, 3-0. Sites 0 and 2 have colour 0, sites 1 and 3 colour 1; so "
          "the lists are (0, 2) and (1, 3), each one group of two lanes. A digit of a group takes one word, of which bits "
          "0 and 1 are used. Every lane can have the local fields -2, 0 and 2. With w = exp(-(3/5) m) the thresholds "
          "floor(2^128 / (1 + w)), and their first 16 binary digits, are:")  # fmt: skip
    thetas = {m: reader.theta(lambda w: 1 / (1 + w), law, 2 * reader.Fraction(m)) for m in (-2, 0, 2)}
    for m, theta in thetas.items():
        say(f"    m = {m:2}   {theta:39}   {binary(theta)}...")
    say("")
    for k in (0, 1):
        state, increment = first_state(digest_of(key, 0, k))
        say(f"The generator of sample 0, epoch {k}, strip 0:", "")
        say(f"    digest      {digest_of(key, 0, k).hex()}", f"    increment   {increment:032x}")
        say(f"    first state {state:032x}", "    first words " + " ".join(f"{w:016x}" for w, _ in zip(words(key, 0, k), range(3))), "")
    lists, kept, total = ((0, 2), (1, 3)), {}, 0
    for attempt in (0, 1):
        low, high = [-1] * 4, [1] * 4
        prose(f"*Attempt {attempt}* starts at time {-(2**attempt)} with lower = - - - - and upper = + + + +." +
              ("" if attempt == 0 else " Its last sweep, that of epoch 0, has the digits of attempt 0 again.") +
              ("" if attempt else " In the second table of each list, U shows the digits drawn, theta(m) is the threshold "
               "at local field m, and then stand the local fields that lower and upper present."))  # fmt: skip
        for k in range(attempt, -1, -1):
            source = words(key, 0, k)
            for sites in lists:
                if (k, sites) in kept:
                    digits = kept[k, sites]
                    say(f"Epoch {k}, list {lists.index(sites)}, sites {sites[0]} and {sites[1]}, the digits as above:", "")
                else:
                    say(f"Epoch {k}, list {lists.index(sites)}, sites {sites[0]} and {sites[1]}:", "")
                    digits = drawn(source, thetas.values(), [f"site {i}" for i in sites])
                    kept[k, sites] = digits
                total += len(digits[0]) * (attempt == 1)
                say("    site  U        U<theta(-2) (0) (2)   m lower, upper   new lower, upper")
                for i, u in zip(sites, digits):
                    fields = [sum(bound[(i + d) % 4] for d in (-1, 1)) for bound in (low, high)]
                    low[i], high[i] = (1 if decided(u, thetas[m]) else -1 for m in fields)
                    new = ", ".join("+" if x > 0 else "-" for x in (low[i], high[i]))
                    say(f"    {i}     {u + '...':8} {answers(u, thetas.values()):21} {fields[0]:2}, {fields[1]:2}           {new}")
                say("")
        show = lambda bound: " ".join("+" if x > 0 else "-" for x in bound)
        equal = low == high
        say(f"At time 0: lower = {show(low)}, upper = {show(high)}: attempt {attempt} " +
            ("meets." if equal else "does not meet."), "")  # fmt: skip
    data = bytes([sum(1 << i for i in range(4) if low[i] > 0)])
    found = reader.draw({"seed": SEED.hex(), "law": law, "index": 0, "depth_limit": 20})
    assert equal and found["depth"] == 1 and found["bytes"] == data.hex() and found["words"] == total, found
    return found


def potts():
    graph = {"couplings": None, "edges": [[0, 1], [1, 2], [2, 0], [2, 3]], "fields": None}
    text = reader.canonical(graph)
    law = {
        "law": "potts", "map": "bond heat bath", "protocol": "doubling", "beta": "1", "coupling": "1", "q": 3,
        "boundary_colour": None,
        "lattice": {"kind": "graph", "sites": 4, "edges": 4, "sha256": hashlib.sha256(text).hexdigest()},
    }  # fmt: skip
    key = hashlib.sha256(reader.canonical(law)).digest()
    prose("**A Potts model on a triangle with a tail**, q = 3, beta = 1, coupling 1, sample 4. The graph object in "
          "canonical JSON and its SHA-256, the law object, and the key:")  # fmt: skip
    broken(text.decode())
    say("    " + hashlib.sha256(text).hexdigest(), "")
    broken(reader.canonical(law).decode())
    say("", "    key = " + key.hex(), "")
    apart, joined = thetas = reader.edge_thresholds(law, "1")
    say("Every edge has w = exp(-1). The thresholds and their first 16 binary digits are:", "")
    say(f"    apart    {apart:39}   {binary(apart)}...", f"    joined   {joined:39}   {binary(joined)}...", "")
    say("Attempt 0 is the sweep of epoch 0, with one group of four lanes, edges 0 to 3:", "")
    digits = drawn(words(key, 4, 0), thetas, [f"edge {e}" for e in range(4)])
    low, high = [False] * 4, [True] * 4
    say("    edge  U       U<apart joined   lower: ends   upper: ends   new lower, upper")
    for e, u in enumerate(digits):
        new, ends = [], []
        for bound in (low, high):
            parts = [{v} for v in range(4)]
            for f, (a, b) in enumerate(graph["edges"]):
                if bound[f] and f != e:
                    one = next(p for p in parts if a in p) | next(p for p in parts if b in p)
                    parts = [p for p in parts if not p & one] + [one]
            together = any(set(graph["edges"][e]) <= p for p in parts)
            bound[e] = decided(u, thetas[together])
            ends.append("joined" if together else "apart")
        new = ", ".join("open" if bound[e] else "closed" for bound in (low, high))
        say(f"    {e}     {u + '...':7} {answers(u, thetas):16} {ends[0]:13} {ends[1]:13} {new}")
    say("")
    assert low == high
    parts = [{v} for v in range(4)]
    for f, (a, b) in enumerate(graph["edges"]):
        if low[f]:
            one = next(p for p in parts if a in p) | next(p for p in parts if b in p)
            parts = [p for p in parts if not p & one] + [one]
    parts = sorted((sorted(p) for p in parts), key=min)
    named = ", ".join("{" + ", ".join(map(str, p)) + "}" for p in parts)
    prose(f"The bounds are equal at time 0, so attempt 0 meets: depth 0, merged at 0. The clusters in order are {named}. "
          f"Their lanes have the thresholds floor(2^128 / 3) = {binary(2**128 // 3)}... and floor(2^129 / 3) = "
          f"{binary(2**129 // 3)}..., and their words come from epoch 2^32 - 1:")  # fmt: skip
    steps = [c * 2**128 // 3 for c in (1, 2)]
    digits = drawn(words(key, 4, 2**32 - 1), steps, [f"{{{p[0]}..}}" if len(p) > 1 else f"{{{p[0]}}}" for p in parts])
    colour = {}
    for p, u in zip(parts, digits):
        for v in p:
            colour[v] = sum(not decided(u, step) for step in steps)
    listed = [f"U = {u}... has colour {colour[p[0]]}" for p, u in zip(parts, digits)]
    prose("; ".join(listed) + ". The sample is one byte a site:")
    data = bytes(colour[v] for v in range(4))
    edges = bytes([sum(1 << e for e in range(4) if low[e])])
    found = reader.draw({"seed": SEED.hex(), "law": law, "graph": graph, "index": 4, "depth_limit": 20})
    assert found["bytes"] == data.hex() and found["depth"] == 0, found
    assert found["bond_hash"] == hashlib.sha256(edges).hexdigest()
    say(f"    bytes  {data.hex(' ')}", f"    hash   {hashlib.sha256(data).hexdigest()}", "")
    prose(f"The open edges alone, packed as for a random cluster, would be the byte {edges.hex()}.")


def section():
    say("## 11. A worked example", "")
    prose("Two small systems, with the seed 00 01 02 ... 1f (32 bytes). Every number was computed by a program that agrees "
          "with many known answers of other programs. JSON is broken into lines here; join them without spaces. Digests, "
          "keys, hashes and samples are bytes in their order, in hexadecimal; words, states and increments are numbers in "
          "hexadecimal, the most significant digit first.")  # fmt: skip
    found = ising()
    prose(f"So the depth is 1 and merged at is {found['merged_at']}; attempt 1 drew {found['words']} words. Bit i of the "
          "sample is 1 where site i is +:")  # fmt: skip
    say(f"    bytes  {found['bytes']}", f"    hash   {found['hash']}", "")
    potts()
    return "\n".join(out).rstrip() + "\n"


if __name__ == "__main__":
    text = section()
    if sys.argv[1:2] == ["--check"]:
        if text not in Path(sys.argv[2]).read_text(encoding="utf-8"):
            sys.exit(f"{sys.argv[2]}: section 11 is not what the numbers give")
        print("section 11 holds")
    else:
        print(text, end="")
