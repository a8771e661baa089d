"""Thermal noise from outside: ensembles over seeds of whole runs, their structure factors shell by shell against closed forms, by
chi-squared. Noise is weak, so that the linear theory holds:
  Cook (Acta Metall. 18 (1970) 297), from a uniform start:  S(k, t) = kT/G (1 - exp(-2 M k^2 G t)),  G = f'' + kappa k^2,
  which grows without bound inside the spinodal (G < 0) and goes to equipartition, kT/G, outside.
The run sees the full nonlinear energy. Shells of width 2 pi / L; a shell's sum over modes of |c_k|^2 over its expectation has a
chi-squared distribution with two degrees of freedom for each pair k, -k (real fields). Seeds are fixed: the numbers do not vary."""
import numpy as np
from scipy.stats import chi2

from scripts import Run

N, SEEDS, KT = 64, 6, 1e-9
k1 = 2 * np.pi * np.fft.fftfreq(N)
K2 = k1[None, :] ** 2 + k1[:, None] ** 2
keep = (np.abs(k1)[None, :] < np.pi * 0.999) & (np.abs(k1)[:, None] < np.pi * 0.999)
SHELL = np.rint(np.sqrt(K2) / (2 * np.pi / N)).astype(int)

SCRIPT = """
local g = grid{{ cells = {{{n}, {n}}}, spacing = 1 }}
local c = g:field("c", {mean})
local m = model{{ energy = c^2*(1 - c)^2 + 0.5*gradsq(c) }}
m:{motion}, thermal_noise = {{ kT = {kT}, seed = {seed}, thickness = 1 }} }})
{before}
m:record{{ mean(c), every = {time} }}
m:save{{ c, every = {time} }}
m:picture{{ c, every = {time} }}
m:run{{ duration = {time}, accuracy = 3e-3 }}
"""


def second_derivative(c):
    return 2 - 12 * c + 12 * c * c


def ensemble(mean, time, motion, before=""):
    power = np.zeros((N, N))
    for seed in range(1, SEEDS + 1):
        text = SCRIPT.format(n=N, mean=mean, motion=motion, kT=KT, seed=seed, before=before.format(seed=seed + 100, kT=KT), time=time)
        c = Run(text).array("c-0001.npy")
        assert abs(c.mean() - mean) < 1e-14 or "relax" in motion
        power += np.abs(np.fft.fft2(c)) ** 2 / N**2 / SEEDS  # S(k), cell volume 1
    return power


def check(name, power, expected):
    """Each shell within its 99.9 % interval, all together within 99 %, and a result ten per cent larger would be seen."""
    total, dof, worst = 0.0, 0, 0.5
    for shell in range(1, N // 2 + 10):
        at = keep & (SHELL == shell) & (K2 > 0)
        modes = at.sum()
        if not modes:
            continue
        x, d = SEEDS * (power[at] / expected[at]).sum(), SEEDS * modes  # |c_k|^2/S: chi-squared of 2 over 2, k and -k the same one
        p = chi2.cdf(x, d)
        worst = max(worst, abs(p - 0.5) + 0.5)
        assert 0.0005 < p < 0.9995, f"{name}: shell {shell}: {x / d:.3f} of the expected S, probability {p:.5f}"
        total, dof = total + x, dof + d
    p = chi2.cdf(total, dof)
    print(f"{name}: S over expectation {total / dof:.4f} +- {np.sqrt(2 / dof):.4f}, {dof} degrees of freedom, p = {p:.3f}")
    assert 0.005 < p < 0.995, name
    assert chi2.cdf(1.1 * total, dof) > 0.9999, "the test would not see an amplitude ten per cent too large"


conserve, relax = "conserve(c, { mobility = 0.8", "relax(c, { rate = 0.8"
for name, mean, time, motion in (
    ("cook inside the spinodal", 0.5, 6.0, conserve),
    ("cook outside", 0.1, 4.0, conserve),
    ("relaxing in a well", 0.0, 3.0, relax),
):
    G = second_derivative(mean) + K2
    rate = 0.8 * (K2 if "conserve" in motion else 1) * G
    with np.errstate(invalid="ignore", divide="ignore"):
        expected = np.where(G == 0, 0, KT * -np.expm1(-2 * rate * time) / G)
    check(name, ensemble(mean, time, motion), expected)

# equipartition, drawn and then kept by the noise
start = "set(c, 0.1 + noise.equilibrium{{ model = m, field = c, kT = {kT}, thickness = 1, seed = {seed} }})"
power = ensemble(0.1, 2.0, conserve, start)
check("equipartition", power, KT / (second_derivative(0.1) + K2))
print("fluctuations hold")
