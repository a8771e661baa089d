"""Benchmark problem 1 of Jokisaari, Voorhees, Guyer, Warren & Heinonen, Comput. Mater. Sci. 126 (2017) 139 (statement from memory):
f = 5 (c-0.3)^2 (0.7-c)^2, kappa = 2, M = 5, on 200 x 200, no-flux and periodic. Initial energy against Gauss-Legendre quadrature
(319.04327561414, no-flux square); energies at t = 10, 100, 500 against an independent solution computed here with SciPy's
transforms and the exponential Runge-Kutta scheme of Cox & Matthews (J. Comput. Phys. 176 (2002) 430) on the same grid."""
import numpy as np
import scipy.fft

from exponential import Scheme
from scripts import Run, close

N, L, M, KAPPA, RHO = 200, 200.0, 5.0, 2.0, 5.0

script = """
local g = grid{ cells = {200, 200}, spacing = 1, walls = "WALL" }
local x, y = g.x, g.y
local c = g:field("c", 0.5 + 0.01*(cos(0.105*x)*cos(0.11*y) + (cos(0.13*x)*cos(0.087*y))^2 + cos(0.025*x - 0.15*y)*cos(0.07*x - 0.02*y)))
local m = model{ energy = 5*(c - 0.3)^2*(0.7 - c)^2 + 2/2*gradsq(c) }
m:conserve(c, { mobility = 5 })
m:record{ every = 10, m:energy(), mean(c) }
m:run{ duration = 500, accuracy = 2e-3 }
"""


def start():
    x = (np.arange(N) + 0.5)[None, :]
    y = (np.arange(N) + 0.5)[:, None]
    return 0.5 + 0.01 * (np.cos(0.105 * x) * np.cos(0.11 * y) + (np.cos(0.13 * x) * np.cos(0.087 * y)) ** 2
                         + np.cos(0.025 * x - 0.15 * y) * np.cos(0.07 * x - 0.02 * y))


class Square:
    """Spectral space of one wall kind: forward, inverse, k^2, weights for the mean of squares."""

    def __init__(self, mirror):
        if mirror:
            k = np.pi * np.arange(N) / L
            self.k2 = k[:, None] ** 2 + k[None, :] ** 2
            self.forward = lambda a: scipy.fft.dctn(a, norm="ortho", workers=2)
            self.inverse = lambda a: scipy.fft.idctn(a, norm="ortho", workers=2)
            self.mask, self.weight = 1, 1 / N ** 2
        else:
            k = 2 * np.pi * np.fft.fftfreq(N, 1)
            kr = 2 * np.pi * np.fft.rfftfreq(N, 1)
            self.k2 = k[:, None] ** 2 + kr[None, :] ** 2
            self.mask = np.ones_like(self.k2)
            self.mask[N // 2, :] = self.mask[:, N // 2] = 0
            self.forward = lambda a: scipy.fft.rfft2(a, workers=2) * self.mask
            self.inverse = lambda a: scipy.fft.irfft2(a, s=(N, N), workers=2)
            two = np.full(N // 2 + 1, 2.0)
            two[0] = two[-1] = 1
            self.weight = two[None, :] / N ** 4

    def energy(self, u):
        c = self.inverse(u)
        bulk = (RHO * (c - 0.3) ** 2 * (0.7 - c) ** 2).mean()
        return L * L * (bulk + KAPPA / 2 * (self.weight * self.k2 * abs(u) ** 2).sum())


def solve(mirror, times):
    """The gradient term is the linear part: with f'' in it too, the part of a spectrum that no real field has would grow."""
    s = Square(mirror)
    rate = -M * KAPPA * s.k2 ** 2
    derivative = lambda c: 2 * RHO * (c - 0.3) * (0.7 - c) * (1.0 - 2 * c)
    nonlinear = lambda u, t: -M * s.k2 * s.forward(derivative(s.inverse(u)))
    early, late = Scheme(rate, 0.125), Scheme(rate, 0.5)
    u, t, out = s.forward(start()), 0.0, []
    for target in times:
        while t < target - 1e-9:
            scheme = early if t < 150 else late
            u = scheme.step(u, nonlinear)
            t += scheme.h
        out.append(s.energy(u))
    return out


for wall in ("mirror", "periodic"):
    ledger = Run(script.replace("WALL", wall)).ledger()
    if wall == "mirror":
        close("initial energy of the no-flux square", ledger["energy"][0], 319.04327561414, 2e-6)
    for t, wanted in zip((10, 100, 500), solve(wall == "mirror", (10, 100, 500))):
        close(f"{wall}: energy at {t}", ledger["energy"][np.argmin(abs(ledger["time"] - t))], wanted, 1e-3)
    close(f"{wall}: mean", ledger["mean(c)"][-1], ledger["mean(c)"][0], 1e-12)
