"""Makes the known answers of outside libraries anew and compares them with what the tests hold.

    python3 outside.py          (needs numpy, mpmath, rfc8785)

NumPy: words of PCG64DXSM. mpmath: thresholds floor(p 2^128) and critical points. rfc8785: canonical
JSON and keys of the law objects. Exits with 1 at any difference and when nothing was compared.
"""

import hashlib
import json
import subprocess
import sys
from pathlib import Path

import mpmath
import rfc8785

HERE = Path(__file__).parent
VALUES = HERE.parent / "values"
VECTORS = HERE.parent / "vectors"
compared = different = 0


def check(what, found, known):
    global compared, different
    compared += 1
    if found != known:
        different += 1
        print(f"{what}: made {found}, the tests hold {known}")


def number(text):
    top, _, bottom = text.partition("/")
    return mpmath.mpf(top) / mpmath.mpf(bottom or 1)


def words():
    script = subprocess.run([sys.executable, HERE / "numpy_words.py"], check=True, capture_output=True, text=True)
    held = json.loads((VALUES / "numpy_pcg64dxsm.json").read_text())
    made = json.loads(script.stdout)
    for one, other in zip(made["runs"], held["runs"], strict=True):
        check(f"words of {other['sample']}/{other['epoch']}/{other['strip']}", one, other)


def thresholds():
    mpmath.mp.dps = 120
    beta_c = mpmath.log(1 + mpmath.sqrt(2)) / 2
    closed = [beta_c, mpmath.log(3) / 4, mpmath.log(2 + mpmath.sqrt(3)) / 2]
    held = json.loads((VALUES / "thresholds.json").read_text())
    for point, value in zip(held["critical_points"], closed, strict=True):
        check(point["name"], mpmath.nstr(value, 35, strip_zeros=False), mpmath.nstr(mpmath.mpf(point["value"]), 35, strip_zeros=False))
    for case in held["heat_bath"]:
        beta = beta_c if case["beta"] == "beta_c" else number(case["beta"])
        for field, theta in case["f128"].items():
            p = 1 / (1 + mpmath.exp(-2 * beta * int(field)))
            check(f"threshold at {case['beta']}, {field}", str(int(mpmath.floor(p * 2**128))), theta)


def laws():
    held = json.loads((VECTORS / "laws.json").read_text())
    for case in held["laws"]:
        canonical = rfc8785.dumps(json.loads(case["canonical"]))
        check(case["what"], canonical.decode(), case["canonical"])
        check(f"key of {case['what']}", hashlib.sha256(canonical).hexdigest(), case["key"])
    check("digest of the graph", hashlib.sha256(rfc8785.dumps(held["graph"])).hexdigest(), held["graph_sha256"])
    check("digest of the held sites", hashlib.sha256(rfc8785.dumps(held["held"])).hexdigest(), held["held_sha256"])


words()
thresholds()
laws()
print(f"{compared} answers of outside libraries compared, {different} different")
sys.exit(1 if different or not compared else 0)
