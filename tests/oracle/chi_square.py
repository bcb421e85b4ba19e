"""Tail probabilities of the chi-square law, for tests/values/chi_square.json.

Run with SciPy 1.17.1: python tests/oracle/chi_square.py > tests/values/chi_square.json
"""

import json

import scipy
from scipy.stats import chi2

rows = []
for freedom in [1, 2, 3, 7, 15, 60, 255, 511, 4000]:
    for tail in [0.999, 0.5, 0.05, 1e-3, 1e-7, 1e-12]:
        value = float(chi2.isf(tail, freedom))
        rows.append({"freedom": freedom, "value": value, "tail": float(chi2.sf(value, freedom))})
print(json.dumps({"source": f"scipy.stats.chi2 of SciPy {scipy.__version__}, tests/oracle/chi_square.py", "rows": rows}))
