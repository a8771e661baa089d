"""What a practitioner would write in Python for the same step: double well c^2 (1-c)^2 with (1/2)|grad c|^2, mobility 1,
first-order semi-implicit with linear stabilisation, on n x n periodic cells. Steps are timed one by one.

usage: step_numpy.py numpy|scipy n dt steps     prints seconds per step (median) and, with --field, saves the field."""
import statistics
import sys
import time

import numpy as np


def main(kind, n, dt, steps, start=None):
    if kind == "scipy":
        import scipy.fft
        forward = lambda a: scipy.fft.rfft2(a, workers=2)
        inverse = lambda a: scipy.fft.irfft2(a, s=(n, n), workers=2)
    else:
        forward, inverse = np.fft.rfft2, lambda a: np.fft.irfft2(a, s=(n, n))
    k = 2 * np.pi * np.fft.fftfreq(n)
    k2 = k[:, None] ** 2 + (2 * np.pi * np.fft.rfftfreq(n))[None, :] ** 2
    k2[n // 2, :] = k2[:, n // 2] = 0  # the Nyquist mode has no derivative and is left out of the state
    k4 = k2 ** 2
    c = 0.5 + 0.01 * np.random.default_rng(1).uniform(-1, 1, (n, n)) if start is None else start
    u = forward(c)
    u[n // 2, :] = u[:, n // 2] = 0
    c = inverse(u)
    times = []
    for _ in range(steps):
        began = time.perf_counter()
        s = 0.5 * max(0.0, (2 - 12 * c + 12 * c * c).max())
        f = forward(2 * c * (1 - c) * (1 - 2 * c))
        mean = u[0, 0]
        u = (u + dt * (s * k2 * u - k2 * f)) / (1 + dt * (k4 + s * k2))
        u[0, 0] = mean
        c = inverse(u)
        times.append(time.perf_counter() - began)
    return statistics.median(times), c


if __name__ == "__main__":
    kind, n, dt, steps = sys.argv[1], int(sys.argv[2]), float(sys.argv[3]), int(sys.argv[4])
    seconds, _ = main(kind, n, dt, steps)
    print(repr(seconds))
