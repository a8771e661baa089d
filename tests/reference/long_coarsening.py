"""Late coarsening, a long check: 512^2, 50:50 double well (spacing 1, kappa 1, mobility 1), four seeds. The interface length
falls as t^-1/3 (Lifshitz & Slyozov 1961, Wagner 1961 for L; interface per volume is 1/L): mean exponent within 0.04 over the
decade t = 2000 .. 20000, a window fixed beforehand; the interval comes from the scatter between seeds (Student, 95 %)."""
import os
import sys
from concurrent.futures import ThreadPoolExecutor

import numpy as np
from scipy.stats import t as student

from scripts import Run

script = """
local g = grid{ cells = {512, 512}, spacing = 1 }
local c = g:field("c", 0.5 + 0.05*noise.uniform{ seed = input("seed", 1) })
local m = model{ energy = c^2*(1 - c)^2 + 0.5*gradsq(c) }
m:conserve(c, { mobility = 1 })
m:record{ every = 250, interface(c):as("interface"), wavelength(c):as("lambda"), m:energy() }
m:run{ duration = 20000 }
"""


def exponent(seed):
    ledger = Run(script, f"seed={seed}", threads=1).ledger()
    t, length = ledger["time"], ledger["interface"]
    window = (t >= 2000) & (t <= 20000)
    slope = np.polyfit(np.log(t[window]), np.log(length[window]), 1)[0]
    print(f"seed {seed}: exponent {slope:.4f}", flush=True)
    return slope


with ThreadPoolExecutor(os.cpu_count()) as pool:
    slopes = list(pool.map(exponent, (1, 2, 3, 4)))
mean, half = np.mean(slopes), student.ppf(0.975, 3) * np.std(slopes, ddof=1) / 2
print(f"mean exponent {mean:.4f} +- {half:.4f} (95 %, four seeds), expected -0.3333 +- 0.04")
sys.exit(int(abs(mean + 1 / 3) > 0.04))
