"""Checks the reader beside this file against every known answer in tests/vectors.

Turns each case into the law object, graph and held list of STREAM.md §10 and compares all that the case states.
Ends with status 1 if anything differs or if nothing was checked. With `--plant` it instead breaks the reader, one
fault at a time, and ends with status 1 if a fault goes unseen.
"""
import json
import sys
from fractions import Fraction
from hashlib import sha256
from pathlib import Path

HERE = Path(__file__).resolve().parent
VECTORS = HERE.parent / "vectors"
# Left out when planting faults, to save time: each takes seconds, and what it shows the others show too.
SLOW = ("square 16x16 critical", "cluster 20x20 q=2, two groups", "chain 140000, two strips a class")

# Rational thresholds of closed forms (STREAM.md §7, §10), worked out by hand: law, local field or coupling, p.
SQUARE, TRIANGULAR = ({"kind": kind} for kind in ("hypercubic", "triangular"))
CLOSED_FORMS = [
    ({"law": "ising", "beta": "critical", "lattice": TRIANGULAR}, Fraction(2), [Fraction(3, 4)]),
    ({"law": "ising", "beta": "critical", "lattice": TRIANGULAR}, Fraction(-4), [Fraction(1, 10)]),
    ({"law": "ising", "beta": "critical", "lattice": SQUARE}, Fraction(0), [Fraction(1, 2)]),
    ({"law": "random-cluster", "q": "9", "p": "critical", "lattice": SQUARE}, "1", [Fraction(1, 4), Fraction(3, 4)]),
    ({"law": "random-cluster", "q": "9/4", "p": "critical", "lattice": SQUARE}, "1", [Fraction(2, 5), Fraction(3, 5)]),
    ({"law": "potts", "q": 9, "beta": "critical", "lattice": SQUARE}, "1/2", [Fraction(1, 10), Fraction(1, 2)]),
    ({"law": "potts", "q": 3, "beta": "0", "lattice": SQUARE}, "1", [Fraction(0), Fraction(0)]),
]

# The first edges, and the ends of absent edges in order, read off STREAM.md §9 by hand.
EDGES = [
    ("hypercubic", [3, 4], ["periodic", "periodic"], [(0, 4), (0, 1)], []),
    ("triangular", [3, 3], ["periodic", "periodic"], [(0, 3), (0, 1), (0, 4)], []),
    ("honeycomb", [2, 3], ["periodic", "periodic"], [(1, 0), (5, 0), (7, 0)], []),
    ("honeycomb", [2, 2], ["free", "wired"], [(1, 0), (3, 2), (1, 2), (5, 4), (1, 4)], [3, 0, 7, 4]),
    ("triangular", [1, 2], ["wired", "periodic"], [(0, 1), (1, 0)], [0, 0, 0, 1, 1, 1, 1, 0]),
    ("hypercubic", [1], ["wired"], [], [0, 0]),
]

# Each fault: what is wrong, the text of the reader, and what it becomes.
FAULTS = [
    ("stream name", "stream 1\\n", "stream 2\\n"),
    ("big-endian address", '"<QII"', '">QII"'),
    ("multiplier", "0xDA942042E4DD58B5", "0xDA942042E4DD58B7"),
    ("word after the step", "(state & LOW | 1)", "(state * PCG + increment & LOW | 1)"),
    ("last xorshift", "hi >> 48", "hi >> 47"),
    ("groups of 256", "512", "256"),
    ("strips of 131072 lanes", "first // 65536", "first // 131072"),
    ("bits from the top", ">> j % 64 & 1", ">> 63 - j % 64 & 1"),
    ("a word for every 32 lanes", "+ 63) // 64", "+ 63) // 32"),
    ("128 digits always", "in group[j][m]]", "in group[j][m] or m < 128]"),
    ("a tie at the end left open", "if t % (1 << 128 - m)}", "if t % (1 << 128)}"),
    ("halves of a plain number exchanged", "next(strip) << 64 | next(strip)", "next(strip) | next(strip) << 64"),
    ("threshold rounded up", "return low", "return low + 1"),
    ("rational powers inverted", "w ** -x.numerator", "w ** x.numerator"),
    ("honeycomb from its other side", "[[0, 0], [0, -1], [-1, 0]]", "[[0, 0], [-1, 0], [0, -1]]"),
    ("no diagonals", '(spec["kind"] == "triangular")', "0"),
    ("word of the highest axis", "words[0]) for", "words[-1]) for"),
    ("boundary edges: ends exchanged", "for end in ends if", "for end in ends[::-1] if"),
    ("colouring by the largest colour", "next(c for c in count() if c not in", "max(c for c in range(9) if c not in"),
    ("held sites ignored", "**dict(held)}", "}"),
    ("frozen neighbours of the other sign", '(word == "minus")', '(word == "plus")'),
    ("half the local field", "Fraction(2 * m, unit)", "Fraction(m, unit)"),
    ("thresholds of the present state only", "else (-1, 1) for b, _", "else (-1,) for b, _"),
    ("bounds of an antiferromagnet not crossed", "falls ^ (x < 0)", "falls"),
    ("U <= theta", "1 if u < end", "1 if u <= end"),
    ("edge counts as joining its own ends", " and e != without", ""),
    ("both edge thresholds exchanged", "[edges[e][1] in cluster", "[edges[e][1] not in cluster"),
    ("Potts convention doubled", '1 if "potts" in', '2 if "potts" in'),
    ("colours from epoch 0", "2**32 - 1", "0"),
    ("colours counted from above", "step <= u", "step > u"),
    ("boundary colour forgotten", 'law.get("boundary_colour", outer)', "0"),
    ("fresh words for each attempt", "seed, key, index, k))", "seed, key, index, k + depth))"),
    ("epochs in the wrong order", "range(depth, -1, -1)", "range(depth + 1)"),
    ("epoch of 2^k sweeps", "1 << k >> 1", "1 << k"),
    ("merged at counted from 1", "max(0, equal - 1)", "equal"),
]


def load(source):
    reader = {"__name__": "stream1"}
    exec(compile(source, "stream1.py", "exec"), reader)
    return reader


def exact(text):
    return str(Fraction(str(text)))


def law_of(case):
    """The law object, the graph object and the held list of a case."""
    kind, lattice = case["law"], dict(case["lattice"])
    extents, held = lattice.get("extents"), case.get("held")
    site = kind in ("ising", "lattice gas")
    graph = None
    if lattice["kind"] == "graph":
        couplings, fields = case.get("edge_couplings"), case.get("site_fields")
        graph = {
            "couplings": couplings and [exact(x) for x in couplings],
            "edges": lattice["edges"],
            "fields": fields and [exact(x) for x in fields],
        }
        digest = sha256(json.dumps(graph, sort_keys=True, separators=(",", ":")).encode()).hexdigest()
        lattice = {"kind": "graph", "sites": lattice["sites"], "edges": len(graph["edges"]), "sha256": digest}
    else:
        words = lattice.get("boundary", "periodic")
        lattice["boundary"] = [words] * len(extents) if isinstance(words, str) else words
    coupling = None if graph and graph["couplings"] else exact(case.get("coupling", "1"))
    field = None if graph and graph["fields"] else exact(case.get("field", "0"))
    digest = sha256(json.dumps(held, separators=(",", ":")).encode()).hexdigest() if held else None
    law = {"map": "site heat bath" if site else "bond heat bath", "protocol": "doubling", "lattice": lattice}
    if kind == "ising":
        law |= {"law": "ising", "beta": exact(case["beta"]), "coupling": coupling, "field": field, "held": digest}
    elif kind == "lattice gas":
        law |= {"law": "lattice-gas", "activity": exact(case["activity"]), "held": digest}
    elif kind == "random cluster":
        law |= {"law": "random-cluster", "q": exact(case["q"]), "p": exact(case["p"]), "beta": None, "convention": None}
    elif kind == "potts":
        law |= {"law": "potts", "q": int(case["q"]), "beta": exact(case["beta"]), "coupling": coupling}
        law |= {"boundary_colour": case.get("boundary_colour")}
    elif kind == "ising by bonds":
        law |= {"law": "ising", "beta": exact(case["beta"]), "coupling": coupling}
    else:
        raise ValueError(f"unknown law {kind}")
    return law, graph, held


def totals(reader, law, graph, answer):
    """What a case states beside the bytes: sums over the sample, from its bytes alone."""
    data = bytes.fromhex(answer["bytes"])
    sites, edges, _ = reader["lattice"](law["lattice"], graph)
    spins = [1 if data[i // 8] >> i % 8 & 1 else -1 for i in range(sites)] if law["law"] != "potts" else []
    if law["law"] == "lattice-gas":
        return {"occupied": spins.count(1)}
    if law["map"] == "bond heat bath":
        return {"open": sum(byte.bit_count() for byte in data)} if law["law"] == "random-cluster" else {}
    couplings = (graph or {}).get("couplings") or [law["coupling"]] * len(edges)
    pairs = sum(Fraction(j) * spins[a] * spins[b] for j, (a, b) in zip(couplings, edges))
    return {"magnetisation": sum(spins), "pair_sum": str(pairs)}


def comparisons(reader, left_out=()):
    """Every comparison of the reader with the known answers: what, expected, found. Quick cases come first."""
    main = json.loads((VECTORS / "stream1.json").read_text())
    seed = bytes.fromhex(main["seed"])
    for case in main["words"]:
        address = seed, bytes.fromhex(main["words_key"]), int(case["sample"]), case["epoch"], case["strip"]
        words = reader["generator"]([0], *address)
        yield f"words of sample {case['sample']}", case["words"], [f"{next(words):016x}" for _ in case["words"]]
    for case in main["thresholds"]:
        law = {"law": "ising", "beta": exact(case["beta"])}
        theta = reader["theta"](lambda w: 1 / (1 + w), law, 2 * Fraction(case["local_field"]))
        yield f"threshold {case}", case["theta"], str(theta)
    for case in main["edge_thresholds"]:
        law = {"law": "random-cluster", "q": exact(case["q"]), "p": exact(case["p"])}
        found = [str(theta) for theta in reader["edge_thresholds"](law, "1")]
        yield f"edge thresholds {case}", [case["apart"], case["joined"]], found
    for law, x, expected in CLOSED_FORMS:
        heat = lambda w: 1 / (1 + w)
        found = reader["edge_thresholds"](law, x) if "q" in law else [reader["theta"](heat, law, 2 * x)]
        yield f"closed form {law} at {x}", [p.numerator * 2**128 // p.denominator for p in expected], found
    for kind, extents, boundary, first, ends in EDGES:
        _, edges, absent = reader["lattice"]({"kind": kind, "extents": extents, "boundary": boundary}, None)
        yield f"edges of {kind} {extents} {boundary}", first, edges[: len(first)]
        yield f"absent edges of {kind} {extents} {boundary}", ends, [end for end, _ in absent]
    for case in main["classes"]:
        spec = case["lattice"] | {"boundary": ["periodic"] * len(case["lattice"]["extents"])}
        n, edges, _ = reader["lattice"](spec, None)
        far = reader["neighbours"](n, edges, edges)
        yield f"classes of {spec}", case["classes"], reader["colouring"](range(n), far)

    laws = json.loads((VECTORS / "laws.json").read_text())
    canonical = reader["canonical"]
    yield "graph object", laws["graph_sha256"], sha256(canonical(laws["graph"])).hexdigest()
    yield "held list", laws["held_sha256"], sha256(canonical(laws["held"])).hexdigest()
    for case in laws["laws"]:
        law = json.loads(case["canonical"])
        yield f"canonical JSON: {case['what']}", case["canonical"], canonical(law).decode()
        yield f"key: {case['what']}", case["key"], sha256(canonical(law)).hexdigest()

    cases = main["cases"] + json.loads((VECTORS / "stream1_strips.json").read_text())["cases"]
    for case in sorted((case for case in cases if case["name"] not in left_out), key=lambda case: case["sites"]):
        law, graph, held = law_of(case)
        n, edges, absent = reader["lattice"](law["lattice"], graph)
        yield f"{case['name']}, sites", case["sites"], n
        yield f"{case['name']}, edges", case["edge_count"], len(edges)
        if "boundary_edges" in case:
            yield f"{case['name']}, boundary edges", case["boundary_edges"], len(absent)
        for known in case["samples"]:
            where = f"{case['name']}, sample {known['index']}"
            question = {"seed": case["seed"], "key": case["key"], "law": law, "graph": graph, "held": held}
            question |= {"index": known["index"], "depth_limit": case.get("depth_limit", known["depth"] + 1)}
            found = reader["draw"](question)
            yield f"{where}, unfinished", known.get("unfinished", False), found["unfinished"]
            found["words_of_last_attempt"] = found["words"]
            if found["bytes"] is not None:
                found |= totals(reader, law, graph, found)
            for name in known.keys() - {"index", "unfinished"} - ({"open"} if "open" not in found else set()):
                yield f"{where}, {name}", known[name], found[name]


def plant(source):
    """Breaks the reader in each of the ways above; the number of faults that no comparison catches."""
    unseen = 0
    for what, old, new in FAULTS:
        if old not in source:
            sys.exit(f"{what}: the reader has no {old!r} to break")
        try:
            answers = comparisons(load(source.replace(old, new)), SLOW)
            caught = next((where for where, expected, found in answers if expected != found), None)
        except Exception as error:  # a broken reader may well stop
            caught = f"stopped with {error!r}"
        unseen += caught is None
        print(f"{what}: {caught or 'UNSEEN'}", flush=True)
    print(f"{len(FAULTS)} faults planted, {unseen} unseen")
    return unseen or not FAULTS


def main():
    source = (HERE / "stream1.py").read_text()
    if sys.argv[1:] == ["--plant"]:
        sys.exit(1 if plant(source) else 0)
    made, wrong = 0, 0
    for where, expected, found in comparisons(load(source)):
        made += 1
        if expected != found:
            wrong += 1
            print(f"{where}: expected {expected}, found {found}")
    print(f"{made} comparisons, {wrong} differences")
    sys.exit(1 if wrong or not made else 0)


if __name__ == "__main__":
    main()
