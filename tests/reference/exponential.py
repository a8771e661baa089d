"""Exponential fourth-order Runge-Kutta steps for u' = rate u + n(u, t), after Cox & Matthews (J. Comput. Phys. 176 (2002) 430).
Helper of the checks that solve equations on their own. Not a test itself."""
import numpy as np


def phi(z):
    """phi_1, phi_2, phi_3 by contour means (Kassam & Trefethen, SIAM J. Sci. Comput. 26 (2005) 1214)."""
    r = np.exp(1j * np.pi * (np.arange(1, 33) - 0.5) / 32)
    out = [np.zeros_like(z) for _ in range(3)]
    for w in r:
        q = z + w
        e = np.exp(q)
        for i, p in enumerate(((e - 1) / q, (e - 1 - q) / q ** 2, (e - 1 - q - q * q / 2) / q ** 3)):
            out[i] += p.real / 32
    return out


class Scheme:
    """Steps of length h; rate is an array of the shape of u, n a function of u and the time."""

    def __init__(self, rate, h):
        z = rate * h
        p1, p2, p3 = phi(z)
        self.h, self.e, self.e2, self.q = h, np.exp(z), np.exp(z / 2), phi(z / 2)[0]
        self.w = p1 - 3 * p2 + 4 * p3, 2 * p2 - 4 * p3, 4 * p3 - p2

    def step(self, u, n, t=0.0):
        half = self.h / 2 * self.q
        n0 = n(u, t)
        a = self.e2 * u + half * n0
        na = n(a, t + self.h / 2)
        nb = n(self.e2 * u + half * na, t + self.h / 2)
        nc = n(self.e2 * a + half * (2 * nb - n0), t + self.h)
        return self.e * u + self.h * (self.w[0] * n0 + self.w[1] * (na + nb) + self.w[2] * nc)
