"""Equations beside those of one conserved field, against solutions computed here with NumPy and SciPy on the same grid, from
equations derived by hand. Each case compares fields and energy at three times:

- fields: |difference| / |field - mean| in the root mean square, over all fields;
- energy: difference over the smaller of its value and its change since the start.

The solutions come from exponential Runge-Kutta steps (exponential.py), which are held against steps twice as long, or from
scipy.integrate.solve_ivp at tight tolerances. `check_equations.py NAME ...` runs the cases whose title contains one of the names."""
import sys
import time

import numpy as np
from scipy.integrate import solve_ivp

from exponential import Scheme
from scripts import Run

ALLOWED = 1e-3            # of mottle's fields and energies
ALLOWED_REFERENCE = 1e-4  # of the reference's fields when its step is doubled


class Box:
    """Spectral space of a periodic box: cells are (nx, ny), arrays (ny, nx). Waves at the Nyquist wavenumber are left out."""

    def __init__(self, cells, spacing):
        (nx, ny), (hx, hy) = cells, spacing
        self.shape, self.cells, self.spacing, self.volume = (ny, nx), cells, spacing, nx * hx * ny * hy
        self.kx = 2 * np.pi * np.fft.rfftfreq(nx, hx)[None, :]
        self.ky = 2 * np.pi * np.fft.fftfreq(ny, hy)[:, None]
        self.k2 = self.kx ** 2 + self.ky ** 2
        self.mask = np.ones_like(self.k2)
        if nx % 2 == 0:
            self.mask[:, -1] = 0
        if ny % 2 == 0:
            self.mask[ny // 2, :] = 0
        self.x = (np.arange(nx) + 0.5)[None, :] * hx
        self.y = (np.arange(ny) + 0.5)[:, None] * hy

    def forward(self, a):
        return np.fft.rfft2(a) * self.mask

    def inverse(self, s):
        return np.fft.irfft2(s, s=self.shape)

    def dx(self, s):
        return self.inverse(1j * self.kx * s)

    def dy(self, s):
        return self.inverse(1j * self.ky * s)

    def divergence(self, p, q):
        return 1j * self.kx * self.forward(p) + 1j * self.ky * self.forward(q)

    def gradsq(self, s):
        return self.dx(s) ** 2 + self.dy(s) ** 2

    def integral(self, a):
        return self.volume * a.mean()

    def noise(self, seed, mean, amplitude):
        """Smooth random start: waves up to a quarter of the largest wavenumber, the mean exact."""
        r = self.forward(np.random.default_rng(seed).normal(size=self.shape)) * (self.k2 < self.k2.max() / 16)
        r[0, 0] = 0
        a = self.inverse(r)
        return mean + amplitude * a / a.std()

    def lua(self):
        return "grid{ cells = {%d, %d}, spacing = {%r, %r} }" % (*self.cells, *self.spacing)


failed = []


def within(what, off, allowed):
    """Prints a deviation and remembers whether it is too large, so that one run shows all of them."""
    good = abs(off) <= allowed
    print(f"  {what}: off by {abs(off):.2e}, allowed {allowed:.0e}" + ("" if good else "   FAILED"), flush=True)
    if not good:
        failed.append(what)


def steps(box, rate, nonlinear, start, times, h):
    """Fields (a list for each of the times) by exponential steps of length h, a divisor of the times."""
    scheme, u, n, out = Scheme(rate, h), np.stack([box.forward(a) for a in start]), 0, []
    for t in times:
        while n < round(t / h):
            u = scheme.step(u, nonlinear, n * h)
            n += 1
        out.append([box.inverse(s) for s in u])
    return out


def distance(got, wanted):
    """Root of the summed squares of the differences, over that of the fields without their means."""
    square = lambda list_: sum((a ** 2).sum() for a in list_)
    return np.sqrt(square(a - b for a, b in zip(got, wanted)) / square(b - b.mean() for b in wanted))


def converged(box, rate, nonlinear, start, times, h):
    """The solution with steps h, after a look at what steps of 2 h make of it."""
    fine, coarse = (steps(box, rate, nonlinear, start, times, s) for s in (h, 2 * h))
    within("reference, steps twice as long", max(distance(a, b) for a, b in zip(coarse, fine)), ALLOWED_REFERENCE)
    return fine


def compare(run, names, start, times, every, reference, energy):
    """Holds mottle's fields and energies against the reference's; energy(fields, time) is the reference's."""
    ledger, first = run.ledger(), energy(start, 0.0)
    within("energy at the start", ledger["energy"][0] / first - 1, 1e-12)
    for t, wanted in zip(times, reference):
        got = [run.array("%s-%04d.npy" % (name, round(t / every))).reshape(wanted[0].shape) for name in names]
        within(f"t = {t:g}: field", distance(got, wanted), ALLOWED)
        e = energy(wanted, t)
        row = ledger["energy"][np.argmin(abs(ledger["time"] - t))]
        within(f"t = {t:g}: energy", (row - e) / min(abs(e), abs(e - first)), ALLOWED)


def case_mobility(accuracy=1e-3):
    """Varying mobility in two dimensions"""
    # F = int (u^2 - 1)^2/4 + |grad u|^2/2:  du/dt = div((1 - 0.8 u^2) grad mu),  mu = u^3 - u - lap u
    box, times = Box((48, 45), (1.0, 1.1)), (20, 60, 100)
    u0 = box.noise(1, 0.1, 0.1)
    run = Run("local g = " + box.lua() + f"""
      local u = g:field("u", from_array{{ file = "u.npy" }})
      local m = model{{ energy = 0.25*(u^2 - 1)^2 + 0.5*gradsq(u) }}
      m:conserve(u, {{ mobility = 1 - 0.8*u^2 }})
      m:record{{ every = 10, m:energy() }}
      m:save{{ u, every = 10 }}
      m:run{{ duration = 100, accuracy = {accuracy} }}
    """, files=[("u.npy", u0)])
    steady = 0.6  # mobility in the rate; the rest goes with the nonlinear part

    def nonlinear(s, t):
        u = box.inverse(s[0])
        mu = box.forward(u ** 3 - u) + box.k2 * s[0]
        mobility = 1 - 0.8 * u ** 2
        return (box.divergence(mobility * box.dx(mu), mobility * box.dy(mu)) + steady * box.k2 ** 2 * s[0])[None]

    reference = converged(box, -steady * box.k2[None] ** 2, nonlinear, [u0], times, 0.1)
    compare(run, ["u"], [u0], times, 10, reference,
            lambda f, t: box.integral((f[0] ** 2 - 1) ** 2 / 4 + box.gradsq(box.forward(f[0])) / 2))


def case_logarithms(accuracy=1e-3):
    """Mobility c (1 - c) with logarithms between mirror walls, one dimension"""
    # F = int c ln c + (1 - c) ln(1 - c) + 2.8 c (1 - c) + 1.5 c_x^2:  c_t = (c (1 - c) mu_x)_x,
    # mu = ln(c / (1 - c)) + 2.8 (1 - 2 c) - 3 c_xx. Mirror walls: periodic with the line and its image.
    n, h, times = 64, 0.9, (20, 100, 400)
    k = 2 * np.pi * np.fft.rfftfreq(2 * n, h)
    k[-1] = 0
    image = lambda c: np.concatenate((c, c[::-1]))
    derive = lambda a, factor: np.fft.irfft(factor * np.fft.rfft(a), 2 * n)
    r = np.random.default_rng(2)
    x = (np.arange(n) + 0.5) * np.pi / n
    c0 = 0.42 + 0.02 * sum(r.normal() * np.cos(q * x) for q in range(1, 12))

    def change(t, c):
        c = image(c)
        mu_x = derive(np.log(c / (1 - c)) + 2.8 * (1 - 2 * c), 1j * k) + derive(c, 3j * k ** 3)
        return derive(c * (1 - c) * mu_x, 1j * k)[:n]

    def energy(f, t):
        c = f[0]
        bulk = c * np.log(c) + (1 - c) * np.log(1 - c) + 2.8 * c * (1 - c)
        return n * h * (bulk + 1.5 * derive(image(c), 1j * k)[:n] ** 2).mean()

    run = Run(f"""
      local g = grid{{ cells = {{{n}}}, spacing = {h}, walls = "mirror" }}
      local c = g:field("c", from_array{{ file = "c.npy" }})
      local m = model{{ energy = c*log(c) + (1 - c)*log(1 - c) + 2.8*c*(1 - c) + 3/2*gradsq(c) }}
      m:conserve(c, {{ mobility = c*(1 - c) }})
      m:record{{ every = 20, m:energy() }}
      m:save{{ c, every = 20 }}
      m:run{{ duration = 400, accuracy = {accuracy} }}
    """, files=[("c.npy", c0)])
    solution = solve_ivp(change, (0, times[-1]), c0, method="Radau", t_eval=times, rtol=1e-7, atol=1e-9)
    compare(run, ["c"], [c0], times, 20, [[c] for c in solution.y.T], energy)


def case_coupled(accuracy=1e-3):
    """Two coupled fields, one conserved, one relaxing"""
    # F = int 2 q^2 + eta^2 (1 - eta)^2 + 0.5 |grad c|^2 + 0.4 |grad eta|^2 + 0.2 grad c . grad eta
    # with q = c - 0.2 - 0.6 h(eta), h = eta^2 (3 - 2 eta), h' = 6 eta (1 - eta):
    #   dc/dt   = lap(4 q - lap c - 0.2 lap eta)
    #   deta/dt = -0.7 (-0.6 h' 4 q + 2 eta (1 - eta) (1 - 2 eta) - 0.8 lap eta - 0.2 lap c)
    box, times = Box((48, 45), (1.0, 1.1)), (5, 30, 60)
    c0, eta0 = box.noise(3, 0.5, 0.03), box.noise(4, 0.5, 0.08)
    run = Run("local g = " + box.lua() + f"""
      local c, eta = g:field("c", from_array{{ file = "c.npy" }}), g:field("eta", from_array{{ file = "eta.npy" }})
      local h = eta^2*(3 - 2*eta)
      local m = model{{ energy = 2*(c - 0.2 - 0.6*h)^2 + eta^2*(1 - eta)^2
        + 0.5*gradsq(c) + 0.4*gradsq(eta) + 0.2*dot(grad(c), grad(eta)) }}
      m:conserve(c, {{ mobility = 1 }})
      m:relax(eta, {{ rate = 0.7 }})
      m:record{{ every = 5, m:energy() }}
      m:save{{ c, eta, every = 5 }}
      m:run{{ duration = 60, accuracy = {accuracy} }}
    """, files=[("c.npy", c0), ("eta.npy", eta0)])

    def nonlinear(s, t):
        c, eta = box.inverse(s[0]), box.inverse(s[1])
        q4 = 4 * (c - 0.2 - 0.6 * eta ** 2 * (3 - 2 * eta))
        bulk = 2 * eta * (1 - eta) * (1 - 2 * eta) - 0.6 * 6 * eta * (1 - eta) * q4
        return np.stack((-box.k2 * (box.forward(q4 - 4 * c) + 0.2 * box.k2 * s[1]), -0.7 * (box.forward(bulk) + 0.2 * box.k2 * s[0])))

    rate = np.stack((-box.k2 * (4 + box.k2), -0.7 * 0.8 * box.k2))
    reference = converged(box, rate, nonlinear, [c0, eta0], times, 0.05)

    def energy(f, t):
        (c, eta), (s, z) = f, map(box.forward, f)
        cross = box.dx(s) * box.dx(z) + box.dy(s) * box.dy(z)
        return box.integral(2 * (c - 0.2 - 0.6 * eta ** 2 * (3 - 2 * eta)) ** 2 + eta ** 2 * (1 - eta) ** 2
                            + 0.5 * box.gradsq(s) + 0.4 * box.gradsq(z) + 0.2 * cross)

    compare(run, ["c", "eta"], [c0, eta0], times, 5, reference, energy)


def case_crystal(accuracy=1e-3):
    """Sixth order: a crystal density"""
    # F = int psi/2 (r + (1 + lap)^2) psi + psi^4/4 (Elder, Katakowski, Haataja & Grant 2002; formula from memory), self-adjoint:
    # dpsi/dt = lap((r + (1 + lap)^2) psi + psi^3), in waves  -k^2 [(r + (1 - k^2)^2) psi + FT(psi^3)], r = -0.25
    box, times = Box((50, 48), (0.8, 0.78)), (10, 100, 200)
    psi0 = box.noise(5, -0.25, 0.05)
    run = Run("local g = " + box.lua() + f"""
      local psi, r = g:field("psi", from_array{{ file = "psi.npy" }}), -0.25
      local function shift(u) return u + laplacian(u) end
      local m = model{{ energy = psi/2*(r*psi + shift(shift(psi))) + psi^4/4 }}
      m:conserve(psi, {{ mobility = 1 }})
      m:record{{ every = 10, m:energy() }}
      m:save{{ psi, every = 10 }}
      m:run{{ duration = 200, accuracy = {accuracy} }}
    """, files=[("psi.npy", psi0)])

    def nonlinear(s, t):
        psi = box.inverse(s[0])
        return (-box.k2 * box.forward(psi ** 3 - 0.25 * psi))[None]

    reference = converged(box, -box.k2[None] * (1 - box.k2[None]) ** 2, nonlinear, [psi0], times, 0.2)

    def energy(f, t):
        psi = f[0]
        return box.integral(psi / 2 * (-0.25 * psi + box.inverse((1 - box.k2) ** 2 * box.forward(psi))) + psi ** 4 / 4)

    compare(run, ["psi"], [psi0], times, 10, reference, energy)


def case_ramp(accuracy=1e-3):
    """Temperature through the critical point and back"""
    # F = int T (c ln c + (1 - c) ln(1 - c)) + 2 c (1 - c) + |grad c|^2/2, critical at T = 1; M = exp(4 - 3/T):
    # dc/dt = M(T) lap(T ln(c / (1 - c)) + 2 (1 - 2 c) - lap c)
    # T: 1.02 for 2, down to 0.75 over 9, held for 24, up to 1.05 over 15, held for 10
    box, times = Box((48, 45), (1.5, 1.4)), (10, 35, 55)
    knots = (0, 2, 11, 35, 50, 60), (1.02, 1.02, 0.75, 0.75, 1.05, 1.05)
    c0 = box.noise(6, 0.45, 0.08)
    run = Run("local g = " + box.lua() + f"""
      local c = g:field("c", from_array{{ file = "c.npy" }})
      local T = param("T", 1.02)
      local m = model{{ energy = T*(c*log(c) + (1 - c)*log(1 - c)) + 2*c*(1 - c) + 0.5*gradsq(c) }}
      m:conserve(c, {{ mobility = exp(4 - 3/T) }})
      m:record{{ every = 5, T, m:energy() }}
      m:save{{ c, every = 5 }}
      m:run{{ accuracy = {accuracy}, schedule = schedule{{ T, start = 1.02, hold{{ 2 }}, ramp{{ to = 0.75, rate = 0.03 }}, hold{{ 24 }},
        ramp{{ to = 1.05, duration = 15 }}, hold{{ 10 }} }} }}
    """, files=[("c.npy", c0)])

    def nonlinear(s, t):
        temperature = np.interp(t, *knots)
        c = box.inverse(s[0])
        mu = box.forward(temperature * np.log(c / (1 - c)) - 4 * c) + box.k2 * s[0]
        return (-np.exp(4 - 3 / temperature) * box.k2 * mu + 2.5 * box.k2 ** 2 * s[0])[None]

    reference = converged(box, -2.5 * box.k2[None] ** 2, nonlinear, [c0], times, 0.05)

    def energy(f, t):
        c = f[0]
        mixing = c * np.log(c) + (1 - c) * np.log(1 - c)
        return box.integral(np.interp(t, *knots) * mixing + 2 * c * (1 - c) + box.gradsq(box.forward(c)) / 2)

    compare(run, ["c"], [c0], times, 5, reference, energy)


def case_tensor(accuracy=1e-3):
    """Anisotropic gradient energy: a tensor"""
    # F = int c^2 (1 - c)^2 + (1.4 c_x^2 + 0.6 c_y^2 + 0.7 c_x c_y)/2 with 2 k12 = 0.7:
    # dc/dt = lap(2 c (1 - c) (1 - 2 c) - 1.4 c_xx - 0.6 c_yy - 0.7 c_xy)
    box, times = Box((48, 45), (1.0, 1.1)), (10, 50, 80)
    c0 = box.noise(7, 0.45, 0.05)
    run = Run("local g = " + box.lua() + f"""
      local c = g:field("c", from_array{{ file = "c.npy" }})
      local k1, k2, k12 = 1.4, 0.6, 0.35
      local m = model{{ energy = c^2*(1 - c)^2 + 0.5*(k1*dx(c)^2 + k2*dy(c)^2 + 2*k12*dx(c)*dy(c)) }}
      m:conserve(c, {{ mobility = 1 }})
      m:record{{ every = 10, m:energy() }}
      m:save{{ c, every = 10 }}
      m:run{{ duration = 80, accuracy = {accuracy} }}
    """, files=[("c.npy", c0)])
    quadratic = 1.4 * box.kx ** 2 + 0.6 * box.ky ** 2 + 0.7 * box.kx * box.ky

    def nonlinear(s, t):
        c = box.inverse(s[0])
        return (-box.k2 * box.forward(2 * c * (1 - c) * (1 - 2 * c)))[None]

    reference = converged(box, (-box.k2 * quadratic)[None], nonlinear, [c0], times, 0.05)

    def energy(f, t):
        c, s = f[0], box.forward(f[0])
        p, q = box.dx(s), box.dy(s)
        return box.integral(c ** 2 * (1 - c) ** 2 + (1.4 * p * p + 0.6 * q * q + 0.7 * p * q) / 2)

    compare(run, ["c"], [c0], times, 10, reference, energy)


def case_normal(accuracy=1e-3):
    """Anisotropic gradient energy: of the interface normal"""
    # W = (1 + e p^2 q^2 / (g + d)^2) g/2 with p = c_x, q = c_y, g = p^2 + q^2, e = 0.8, d = 0.01; F = int c^2 (1 - c)^2 + 1.5 W:
    #   dW/dp = p (1 + e [q^2 g / (g + d)^2 + p^2 q^2 (d - g) / (g + d)^3]), dW/dq likewise,
    #   dc/dt = -(2 c (1 - c) (1 - 2 c) - 1.5 div(dW/dp, dW/dq))
    # Convex for e < 4/3 and d = 0.
    box, times, e, d = Box((48, 45), (1.0, 1.0)), (5, 20, 40), 0.8, 0.01
    blob = lambda x, y, radius: 0.5 * (1 - np.tanh((np.hypot(box.x - x, box.y - y) - radius) / 2.5))
    c0 = box.inverse(box.forward(blob(21, 24, 14) + blob(41, 8, 6.5)))
    run = Run("local g = " + box.lua() + f"""
      local c = g:field("c", from_array{{ file = "c.npy" }})
      local squares = dx(c)^2*dy(c)^2/(gradsq(c) + {d})^2
      local m = model{{ energy = c^2*(1 - c)^2 + 1.5*0.5*(1 + {e}*squares)*gradsq(c) }}
      m:relax(c, {{ rate = 1 }})
      m:record{{ every = 5, m:energy() }}
      m:save{{ c, every = 5 }}
      m:run{{ duration = 40, accuracy = {accuracy} }}
    """, files=[("c.npy", c0)])

    def change(t, c):
        c = c.reshape(box.shape)
        s = box.forward(c)
        p, q = box.dx(s), box.dy(s)
        g = p * p + q * q
        common = (p * q) ** 2 * (d - g) / (g + d) ** 3
        wp = p * (1 + e * (q * q * g / (g + d) ** 2 + common))
        wq = q * (1 + e * (p * p * g / (g + d) ** 2 + common))
        return box.inverse(1.5 * box.divergence(wp, wq) - box.forward(2 * c * (1 - c) * (1 - 2 * c))).ravel()

    def energy(f, t):
        c, s = f[0], box.forward(f[0])
        p, q = box.dx(s), box.dy(s)
        g = p * p + q * q
        return box.integral(c ** 2 * (1 - c) ** 2 + 0.75 * (1 + e * (p * q / (g + d)) ** 2) * g)

    solution = solve_ivp(change, (0, times[-1]), c0.ravel(), method="DOP853", t_eval=times, rtol=1e-8, atol=1e-10)
    compare(run, ["c"], [c0], times, 5, [[c.reshape(box.shape)] for c in solution.y.T], energy)


def case_copolymer(accuracy=1e-3):
    """Long-range order of a block copolymer"""
    # F = int (u^2 - 1)^2/4 + |grad u|^2/2 + 0.05 (u - m) (-lap)^-1 (u - m) (Ohta & Kawasaki 1986), sigma = 0.1, m the mean:
    # du/dt = lap(u^3 - u - lap u) - 0.1 (u - m)
    box, times, mean = Box((48, 45), (1.0, 1.1)), (20, 60, 150), 0.15
    u0 = box.noise(8, mean, 0.1)
    run = Run("local g = " + box.lua() + f"""
      local u = g:field("u", from_array{{ file = "u.npy" }})
      local sigma, mean = 0.1, {mean}
      local long = filter(u - mean, function(k) return k > 0 and 1/k^2 or 0 end)
      local m = model{{ energy = 0.25*(u^2 - 1)^2 + 0.5*gradsq(u) + sigma/2*(u - mean)*long }}
      m:conserve(u, {{ mobility = 1 }})
      m:record{{ every = 10, m:energy() }}
      m:save{{ u, every = 10 }}
      m:run{{ duration = 150, accuracy = {accuracy} }}
    """, files=[("u.npy", u0)])
    decay = np.where(box.k2 > 0, 0.1, 0)

    def nonlinear(s, t):
        u = box.inverse(s[0])
        return (-box.k2 * box.forward(u ** 3 - u) - decay * s[0])[None]

    reference = converged(box, -box.k2[None] ** 2, nonlinear, [u0], times, 0.1)
    inverse = np.where(box.k2 > 0, 1 / np.where(box.k2 > 0, box.k2, 1), 0)

    def energy(f, t):
        u, s = f[0], box.forward(f[0])
        return box.integral((u ** 2 - 1) ** 2 / 4 + box.gradsq(s) / 2 + 0.05 * (u - mean) * box.inverse(inverse * s))

    compare(run, ["u"], [u0], times, 10, reference, energy)


for case in (case_mobility, case_logarithms, case_coupled, case_crystal, case_ramp, case_tensor, case_normal, case_copolymer):
    if not sys.argv[1:] or any(name in case.__doc__ for name in sys.argv[1:]):
        began = time.monotonic()
        print(case.__doc__)
        case()
        print(f"  {time.monotonic() - began:.1f} s")
if failed:
    sys.exit(f"FAILED: {len(failed)} deviations")
