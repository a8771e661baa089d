"""Measurements against SciPy and scikit-image on random images: labels (scipy.ndimage.label, joined across periodic walls by
hand), level lines (skimage.measure.find_contours, marching squares of its own), the structure factor (numpy.fft), Euler numbers,
Crofton perimeters, second moments of regions and Otsu's threshold (skimage), run lengths, correlation and curvature (NumPy),
profiles (SciPy)."""
import os
import subprocess
import sys
import tempfile

import numpy as np
import scipy.fft
import scipy.ndimage
import scipy.optimize
import scipy.special
import skimage.filters
import skimage.measure

probe = os.path.join(os.environ["BUILD"], "probe_measure")


def run(a, walls, level):
    with tempfile.NamedTemporaryFile(suffix=".raw") as f:
        a.astype("<f8").tofile(f.name)
        shape = list(a.shape[::-1]) + [1] * (3 - a.ndim)
        out = subprocess.run([probe, f.name, *map(str, shape), walls, repr(level)], check=True, capture_output=True, text=True).stdout
    values, shells, lists = {}, [], {"shape": [], "chord": [], "correlation": [], "sector": [], "profile": []}
    for line in out.splitlines():
        words = line.split()
        if words[0] == "shell":
            shells.append([float(w) for w in words[1:]])
        elif words[0] in lists:
            lists[words[0]].append([float(w) for w in words[1:]])
        else:
            values[words[0]] = float(words[1])
    return {**values, **{k: np.array(v) for k, v in lists.items()}}, np.array(shells)


def close(name, got, wanted, rtol, atol=0.0):
    if abs(got - wanted) > rtol * abs(wanted) + atol:
        sys.exit(f"{name}: {got!r}, expected {wanted!r}")


def labels(mask, walls, full):
    structure = scipy.ndimage.generate_binary_structure(mask.ndim, mask.ndim if full else 1)
    pad = [(1, 1) if w == "p" else (0, 0) for w in walls[:mask.ndim][::-1]]
    inner = tuple(slice(p[0], s + p[0]) for p, s in zip(pad, mask.shape))
    wrapped, n = scipy.ndimage.label(np.pad(mask, pad, mode="wrap"), structure)
    parent = list(range(n + 1))

    def root(i):
        while parent[i] != i:
            i = parent[i]
        return i

    ids = np.pad(np.arange(mask.size).reshape(mask.shape), pad, mode="wrap")
    first = {}
    for cell, label in zip(ids.ravel(), wrapped.ravel()):  # copies of a cell belong to one domain
        if label:
            if cell in first:
                parent[root(label)] = root(first[cell])
            else:
                first[cell] = label
    found = np.array([root(x) for x in wrapped[inner].ravel() if x])
    return len(set(found)), max(np.bincount(found)) if len(found) else 0


def smooth(shape, sigma, seed, mode):
    return scipy.ndimage.gaussian_filter(np.random.default_rng(seed).normal(size=shape), sigma, mode=mode)


for seed in range(12):
    for walls in ("ppp", "mmm", "pmp", "mpm"):
        for shape in ((24, 31), (9, 10, 11)):
            a = smooth(shape, 0.7, seed, "wrap")
            v, shells = run(a, walls, 0.03)
            for full in (False, True):
                n, largest = labels(a > 0.03, walls, full)
                name = "full" if full else "faces"
                close(name, v[name], n, 0)
                close(name + " largest", v[name + "_largest"], largest, 0)
            close("mean", v["mean"], a.mean(), 0, 1e-15)
            close("variance", v["variance"], a.var(), 1e-13)

# Level lines: the inner part of a smooth image, where no wall matters.
for seed in range(6):
    a = smooth((64, 64), 4, seed, "nearest")
    a[:3] = a[-3:] = -1
    a[:, :3] = a[:, -3:] = -1
    v, _ = run(a, "mmm", 0.011)
    length = sum(np.sqrt((np.diff(c, axis=0) ** 2).sum(1)).sum() for c in skimage.measure.find_contours(a, 0.011))
    close("contour", v["interface"], length, 1e-10)

# Level surface: skimage's Lewiner cubes and our tetrahedra are different surfaces of the same order of accuracy.
a = smooth((40, 40, 40), 4, 3, "nearest")
a[:2] = a[-2:] = a[:, :2] = a[:, -2:] = a[:, :, :2] = a[:, :, -2:] = -1
v, _ = run(a, "mmm", 0.0)
vertices, faces, _, _ = skimage.measure.marching_cubes(a, 0.0)
close("surface", v["interface"], skimage.measure.mesh_surface_area(vertices, faces), 0.02)

# Structure factor of a periodic image from its definition.
a = smooth((36, 48), 1.5, 5, "wrap")
v, shells = run(a, "ppp", 0.0)
s = np.abs(np.fft.fft2(a - a.mean())) ** 2 / a.size
k = 2 * np.pi * np.hypot(*np.meshgrid(np.fft.fftfreq(36), np.fft.fftfreq(48), indexing="ij"))
s[18, :] = s[:, 24] = 0
kept = np.ones_like(s, bool)
kept[18, :] = kept[:, 24] = kept[0, 0] = False
close("sum rule", v["sum_rule"], s.sum() / a.size, 1e-12)
shell = np.floor(k / (2 * np.pi / 48) + 0.5).astype(int)
for i, (mean_k, mean_s, modes) in enumerate(shells, start=1):
    m = kept & (shell == i)
    close("modes", modes, m.sum(), 0)
    close("shell S", mean_s, s[m].mean(), 1e-11)
    close("shell k", mean_k, k[m].mean(), 1e-12)
close("wavelength", v["wavelength"], 2 * np.pi * shells[:, 1].sum() / (shells[:, 0] * shells[:, 1]).sum(), 1e-12)

close("second moment", v["second"], (shells[:, 1] * shells[:, 0] ** 2).sum() / shells[:, 1].sum(), 1e-12)

# Correlation averaged over directions, mode by mode; shares of the directions.
r = v["correlation"][:, 0]
wanted = np.array([(s * scipy.special.j0(k * x))[kept].sum() for x in r]) / s[kept].sum()
close("correlation", np.abs(v["correlation"][:, 1] - wanted).max(), 0, 0, 1e-3)
zero = scipy.optimize.brentq(lambda x: (s * scipy.special.j0(k * x))[kept].sum(), 1e-3, r[np.flatnonzero(wanted < 0)[0]])
close("first zero", v["zero"], zero, 1e-5)
place = (np.arctan2(*np.meshgrid(np.fft.fftfreq(36), np.fft.fftfreq(48), indexing="ij")) / np.pi * 6)[kept]
share = np.zeros(6)
for way in (-1e-9, 1e-9):  # modes on a bound are shared
    np.add.at(share, np.round(place + way).astype(int) % 6, 0.5 * s[kept] / s[kept].sum())
for got, wanted in zip(v["sector"][:, 0], share):
    close("sector", got, wanted, 1e-12)

# Mirror walls: the same sum rule through the cosine transform.
v, _ = run(a, "mmm", 0.0)
c = scipy.fft.dctn(a - a.mean(), norm="ortho")
close("mirror sum rule", v["sum_rule"], (c ** 2).sum() / a.size, 1e-12)

# Euler characteristic of the part in the box, mirror walls being the ends of the picture.
for seed in range(8):
    for shape in ((17, 22), (8, 9, 10)):
        a = smooth(shape, 0.6, seed, "nearest")
        v, _ = run(a, "mmm", 0.05)
        close("euler, faces", v["euler_faces"], skimage.measure.euler_number(a > 0.05, connectivity=1), 0, 1e-9)
        close("euler, full", v["euler_full"], skimage.measure.euler_number(a > 0.05, connectivity=a.ndim), 0, 1e-9)

# Crofton perimeter with four directions; axes, direction and aspect of each region; Otsu's level, whose bound of classes lies
# half a class above the middle that scikit-image names.
for seed in range(8):
    a = smooth((64, 48), 3, seed, "nearest")
    a[:2] = a[-2:] = a[:, :2] = a[:, -2:] = -0.3
    v, _ = run(a, "mmm", 0.02)
    close("crofton", v["boundary_faces"], skimage.measure.perimeter_crofton(a > 0.02, directions=4), 1e-12)
    close("otsu", v["otsu"], skimage.filters.threshold_otsu(a, nbins=256) + (a.max() - a.min()) / 512, 1e-12)
    regions = skimage.measure.regionprops(skimage.measure.label(a > 0.02, connectivity=1))
    close("regions", len(v["shape"]), len(regions), 0)
    for (size, longest, shortest, dx, dy), region in zip(v["shape"], regions):
        m = region.moments_central
        moments = np.array([[m[0, 2], m[1, 1]], [m[1, 1], m[2, 0]]]) / m[0, 0] + np.eye(2) / 12  # a cell is a square
        value, vector = np.linalg.eigh(moments)
        close("area", size, region.area, 1e-15)
        close("long axis", longest, 4 * np.sqrt(value[1]), 1e-9)
        close("short axis", shortest, 4 * np.sqrt(value[0]), 1e-9)
        if value[1] > 1.001 * value[0]:
            close("direction", abs(dx * vector[0, 1] + dy * vector[1, 1]), 1, 1e-9)


def run_lengths(mask, axis, periodic):
    """Number of runs of each length: between the places where the line changes, twice around (periodic) or doubled by reflection."""
    number = np.zeros(2 * mask.shape[axis])
    for line in np.moveaxis(mask, axis, -1).reshape(-1, mask.shape[axis]):
        line = line if periodic else np.concatenate((line, line[::-1]))
        if line.all() or not line.any():
            continue
        changes = np.flatnonzero(line != np.roll(line, 1))
        lengths = np.diff(np.append(changes, changes[0] + len(line)))
        np.add.at(number, lengths[line[changes]], 1 if periodic else 0.5)
    return number


for seed in range(4):
    for walls in ("ppp", "mmm"):
        for shape in ((20, 31), (7, 8, 9)):
            a = smooth(shape, 0.8, seed, "wrap")
            v, _ = run(a, walls, 0.03)
            for axis in range(a.ndim):
                wanted = run_lengths(a > 0.03, a.ndim - 1 - axis, walls == "ppp")
                for _, length, n in v["chord"][v["chord"][:, 0] == axis]:
                    close("chords", n, wanted[int(length)], 0)

# Curvature of the level line of a periodic image: derivatives by Fourier, interpolated to scikit-image's contour; the tensor of normals
# from the contour's own pieces.
a = smooth((96, 96), 5, 2, "wrap")
v, _ = run(a, "ppp", 0.01)
kx, ky = np.meshgrid(2 * np.pi * np.fft.fftfreq(96), 2 * np.pi * np.fft.fftfreq(96))
spectrum = np.fft.fft2(a)
cx, cy, cxx, cyy, cxy = (np.fft.ifft2(spectrum * f).real for f in (1j * kx, 1j * ky, -kx * kx, -ky * ky, -kx * ky))
bent = -(cxx * cy**2 - 2 * cxy * cx * cy + cyy * cx**2) / (cx**2 + cy**2) ** 1.5
wide = np.pad(a, ((0, 1), (0, 1)), mode="wrap")
weight, there, normal = [], [], []
for contour in skimage.measure.find_contours(wide, 0.01):
    step = np.diff(contour, axis=0)
    weight.append(np.hypot(*step.T))
    there.append(0.5 * (contour[1:] + contour[:-1]))
    normal.append(step / weight[-1][:, None])
weight, there, normal = map(np.concatenate, (weight, there, normal))
kappa = scipy.ndimage.map_coordinates(np.pad(bent, ((0, 1), (0, 1)), mode="wrap"), there.T, order=3)
mean = np.average(kappa, weights=weight)
deviation = np.sqrt(np.average((kappa - mean) ** 2, weights=weight))
close("mean curvature", v["curvature"], mean, 0, 0.01 * deviation)
close("deviation of curvature", v["curvature_deviation"], deviation, 0.01)
close("Gauss and Bonnet", v["curvature_integral"], 2 * np.pi * v["euler_faces"], 0, 0.01 * (np.abs(kappa) * weight).sum())
close("tensor of normals, xx", v["tensor_xx"], np.average(normal[:, 0] ** 2, weights=weight), 0, 0.002)  # steps are (y, x)
close("tensor of normals, xy", v["tensor_xy"], -np.average(normal[:, 0] * normal[:, 1], weights=weight), 0, 0.002)

# Gauss and Bonnet in a random bicontinuous volume, periodic: 4 pi times the Euler characteristic.
a = smooth((48, 48, 48), 4, 7, "wrap")
v, _ = run(a, "ppp", 0.0)
close("Gauss and Bonnet in space", v["gauss_integral"], 4 * np.pi * v["euler_faces"], 0, 4 * np.pi * 0.5)

# A line through the box and beyond its walls, linear interpolation by SciPy.
for walls, mode in (("ppp", "grid-wrap"), ("mmm", "reflect")):
    for shape in ((11, 14), (6, 7, 8)):
        a = smooth(shape, 1, 3, "wrap")
        v, _ = run(a, walls, 0.0)
        places = [1.5 * n * np.arange(20) / 19 - 0.5 for n in shape]
        wanted = scipy.ndimage.map_coordinates(a, places, order=1, mode=mode)
        close("profile", np.abs(v["profile"][:, 0] - wanted).max(), 0, 0, 1e-12)
print("measurements agree")
