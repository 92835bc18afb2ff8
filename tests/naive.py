"""Slow and obvious versions of what geoshape computes, one polygon at a time, by other routes.

A polygon is a list of parts, a part a list of rings with the exterior first, a ring a list of (x, y) pairs without the
closing one. Where only sums and products are needed the functions work in rational numbers: give them integers,
``Fraction`` or floats (each float is a rational number), and the answer is exact.
"""

import cmath
import math
from fractions import Fraction
from itertools import combinations, pairwise, product

import numpy as np

ORDERS = [(0, 0), (1, 0), (0, 1), (2, 0), (1, 1), (0, 2), (3, 0), (2, 1), (1, 2), (0, 3)]


def parts_of(polygon):
    """Take a shapely Polygon or MultiPolygon apart into lists of pairs."""
    pieces = list(polygon.geoms) if polygon.geom_type == "MultiPolygon" else [polygon]
    return [[list(ring.coords)[:-1] for ring in (piece.exterior, *piece.interiors)] for piece in pieces]


def exact(ring):
    return [(Fraction(x), Fraction(y)) for x, y in ring]


def edges(ring):
    return list(zip(ring, [*ring[1:], ring[0]], strict=True))


def all_rings(parts):
    return [ring for part in parts for ring in part]


# Lengths and areas


def signed_area(ring):
    ring = exact(ring)
    return sum((a[0] * b[1] - a[1] * b[0] for a, b in edges(ring)), Fraction(0)) / 2


def area(parts):
    total = Fraction(0)
    for exterior, *holes in parts:
        total += abs(signed_area(exterior)) - sum(abs(signed_area(hole)) for hole in holes)
    return total


def ring_length(ring):
    # The differences are taken in rational numbers: far from the origin they would lose digits.
    return math.fsum(math.hypot(float(b[0] - a[0]), float(b[1] - a[1])) for a, b in edges(exact(ring)))


def perimeter(parts):
    return math.fsum(ring_length(ring) for ring in all_rings(parts))


def outline_length(parts):
    return math.fsum(ring_length(part[0]) for part in parts)


# Moments: triangles of a fan, each integrated by the formula for barycentric coordinates,
# integral of l1^a l2^b l3^c over a triangle T = 2 |T| a! b! c! / (a + b + c + 2)!


def _expanded(values, power):
    """Expand (l1 v1 + l2 v2 + l3 v3)^power: a dict of exponents of l to coefficients."""
    terms = {(0, 0, 0): 1}
    for _ in range(power):
        grown = {}
        for exponents, factor in terms.items():
            for i in range(3):
                key = tuple(e + (i == j) for j, e in enumerate(exponents))
                grown[key] = grown.get(key, 0) + factor * values[i]
        terms = grown
    return terms


def _triangle_moment(a, b, c, p, q):
    """(p + q + 2)! times the integral of x^p y^q over a triangle, negative for one that runs clockwise."""
    twice_area = (b[0] - a[0]) * (c[1] - a[1]) - (b[1] - a[1]) * (c[0] - a[0])
    total = 0
    in_x, in_y = _expanded((a[0], b[0], c[0]), p), _expanded((a[1], b[1], c[1]), q)
    for (ex, fx), (ey, fy) in product(in_x.items(), in_y.items()):
        i, j, k = (m + n for m, n in zip(ex, ey, strict=True))
        total += fx * fy * math.factorial(i) * math.factorial(j) * math.factorial(k)
    return total * twice_area


def moment(parts, p, q, about=(0, 0)):
    """Integral of (x - x0)^p (y - y0)^q over the polygon, whichever way its rings run."""
    x0, y0 = Fraction(about[0]), Fraction(about[1])
    total = Fraction(0)
    for part in parts:
        for number, ring in enumerate(part):
            moved = [(x - x0, y - y0) for x, y in exact(ring)]
            # Whole numbers over one denominator: the same as rational numbers, only quicker.
            below = math.lcm(*(value.denominator for point in moved for value in point))
            whole = [(int(x * below), int(y * below)) for x, y in moved]
            fan = sum(_triangle_moment(whole[0], b, c, p, q) for b, c in pairwise(whole[1:]))
            sense = 1 if signed_area(ring) > 0 else -1
            sign = sense if number == 0 else -sense
            total += Fraction(sign * fan, below ** (p + q + 2) * math.factorial(p + q + 2))
    return total


def raw_moments(parts):
    return [moment(parts, p, q) for p, q in ORDERS]


def centroid(parts):
    whole = moment(parts, 0, 0)
    return moment(parts, 1, 0) / whole, moment(parts, 0, 1) / whole


def central_moments(parts):
    """Give mu_pq by (p, q)."""
    centre = centroid(parts)
    return {(p, q): moment(parts, p, q, centre) for p, q in ORDERS}


# Hu's invariants from complex moments c_pq = integral of (x + iy)^p (x - iy)^q: each is a product of complex moments
# whose turns cancel. Complex numbers are pairs of rational numbers here.


def _times(u, v):
    return u[0] * v[0] - u[1] * v[1], u[0] * v[1] + u[1] * v[0]


def _to_power(u, n):
    result = (Fraction(1), Fraction(0))
    for _ in range(n):
        result = _times(result, u)
    return result


def complex_moment(mu, p, q):
    """Expand (x + iy)^p (x - iy)^q and put central moments in the place of the powers."""
    terms = {(0, 0): (Fraction(1), Fraction(0))}
    for sign in [1] * p + [-1] * q:
        grown = {}
        for (i, j), factor in terms.items():
            for key, by in (((i + 1, j), (1, 0)), ((i, j + 1), (0, sign))):
                old = grown.get(key, (Fraction(0), Fraction(0)))
                new = _times(factor, by)
                grown[key] = (old[0] + new[0], old[1] + new[1])
        terms = grown
    real = sum(factor[0] * mu[key] for key, factor in terms.items())
    imaginary = sum(factor[1] * mu[key] for key, factor in terms.items())
    return real, imaginary


def hu_invariants(mu):
    """Hu's seven, exact. The source of this form: Flusser 2000, Pattern Recognition 33, eq. 9."""
    size = mu[0, 0]
    c11, c20, c02 = (complex_moment(mu, *order) for order in ((1, 1), (2, 0), (0, 2)))
    c21, c12, c30, c03 = (complex_moment(mu, *order) for order in ((2, 1), (1, 2), (3, 0), (0, 3)))
    turned = _times(c30, _to_power(c12, 3))
    return [
        c11[0] / size**2,
        _times(c20, c02)[0] / size**4,
        _times(c30, c03)[0] / size**5,
        _times(c21, c12)[0] / size**5,
        turned[0] / size**10,
        _times(c20, _to_power(c12, 2))[0] / size**7,
        turned[1] / size**10,
    ]


# Affine invariants as contractions of moment tensors with the permutation symbol


def _contraction(mu, tensors, crosses):
    """Sum over all indices the product of moment tensors and of one permutation symbol for each pair in `crosses`.

    `tensors` names the indices of each moment tensor by letters, `crosses` pairs the letters. The symbol is 1 for the
    indices (x, y), -1 for (y, x) and 0 for equal ones.
    """
    total = Fraction(0)
    for swapped in product((False, True), repeat=len(crosses)):
        is_y = {}
        for (a, b), swap in zip(crosses, swapped, strict=True):
            is_y[a], is_y[b] = swap, not swap
        term = Fraction((-1) ** sum(swapped))
        for letters in tensors:
            along_y = sum(is_y[letter] for letter in letters)
            term *= mu[len(letters) - along_y, along_y]
        total += term
    return total


def affine_invariants(mu):
    """I1, I2, I3, exact, as contractions; I2 with the sign that makes it positive for any triangle."""
    size = mu[0, 0]
    first = _contraction(mu, ["ab", "cd"], ["ac", "bd"])
    second = _contraction(mu, ["abc", "def", "ghi", "jkl"], ["be", "cf", "hk", "il", "ag", "dj"])
    third = _contraction(mu, ["ab", "cde", "fgh"], ["ac", "bf", "dg", "eh"])
    return [first / 2 / size**4, second / 2 / size**10, third / 2 / size**7]


def inertia_compactness(mu):
    return float(mu[0, 0] ** 2 / (mu[2, 0] + mu[0, 2])) / (2 * math.pi)


def principal_axes(mu):
    """Give (major, minor, strength, azimuth in degrees) from the eigenvectors of the second moments."""
    size = float(mu[0, 0])
    matrix = np.array([[mu[2, 0], mu[1, 1]], [mu[1, 1], mu[0, 2]]], dtype=float) / size
    (small, large), vectors = np.linalg.eigh(matrix)
    x, y = vectors[:, 1]
    azimuth = math.degrees(math.atan2(x, y)) % 180.0
    return 4 * math.sqrt(large), 4 * math.sqrt(max(small, 0.0)), (large - small) / (large + small), azimuth


# Outline: points at equal arc length, and its spectrum


def _distances(ring):
    length = [math.hypot(float(b[0] - a[0]), float(b[1] - a[1])) for a, b in edges(exact(ring))]
    return length, [math.fsum(length[:i]) for i in range(len(length) + 1)]


def point_at(ring, distance):
    """Walk from the first vertex along the edges."""
    length, reached = _distances(ring)
    for i, (a, b) in enumerate(edges(ring)):
        if distance <= reached[i + 1] and length[i] > 0:
            share = (distance - reached[i]) / length[i]
            return complex(a[0] + share * (b[0] - a[0]), a[1] + share * (b[1] - a[1]))
    return complex(*ring[0])


def resample(ring, n):
    total = ring_length(ring)
    return [point_at(ring, total * j / n) for j in range(n)]


def dft(points, k):
    """Take one coefficient of the discrete Fourier transform, by its definition."""
    n = len(points)
    terms = [z * cmath.exp(-2j * math.pi * (j * k % n) / n) for j, z in enumerate(points)]
    return complex(math.fsum(t.real for t in terms), math.fsum(t.imag for t in terms)) / n


_NODES, _WEIGHTS = np.polynomial.legendre.leggauss(16)


def fourier_coefficient(ring, k):
    """Integrate z(s) exp(-2 pi i k s / L) / L over the outline, edge by edge in pieces of an eighth of a wave."""
    length, reached = _distances(ring)
    total = reached[-1]
    pieces = []
    for i, (a, b) in enumerate(edges(ring)):
        start, direction = complex(*a), complex(b[0] - a[0], b[1] - a[1])
        n_pieces = 1 + int(8 * abs(k) * length[i] / total)
        for piece in range(n_pieces):
            share = (piece + (_NODES + 1) / 2) / n_pieces
            s = reached[i] + share * length[i]
            value = (start + share * direction) * np.exp(-2j * np.pi * k * s / total)
            pieces.append(complex((value * _WEIGHTS).sum()) / 2 * length[i] / n_pieces / total)
    return complex(math.fsum(p.real for p in pieces), math.fsum(p.imag for p in pieces))


def elliptic_coefficients(ring, n):
    """a, b, c, d of harmonic n, by the formulas of Kuhl & Giardina 1982, Computer Graphics and Image Processing 18."""
    length, reached = _distances(ring)
    total = reached[-1]
    factor = total / (2 * n**2 * math.pi**2)
    sums = [0.0, 0.0, 0.0, 0.0]
    for i, (p, q) in enumerate(edges(ring)):
        before, after = (2 * n * math.pi * reached[i + step] / total for step in (0, 1))
        cosines, sines = math.cos(after) - math.cos(before), math.sin(after) - math.sin(before)
        for at, (difference, wave) in enumerate(
            ((q[0] - p[0], cosines), (q[0] - p[0], sines), (q[1] - p[1], cosines), (q[1] - p[1], sines))
        ):
            sums[at] += float(difference) / length[i] * wave
    return tuple(factor * value for value in sums)


def spectrum(coefficient, harmonics, top=32):
    """Columns of the spectrum from a function that gives the coefficient of any k."""
    z = {k: abs(coefficient(k)) for k in range(-top, top + 1) if k != 0}
    columns = {f"fd_p{k:02d}": z[k] / z[1] for k in range(2, harmonics + 1)}
    columns |= {f"fd_n{k:02d}": z[-k] / z[1] for k in range(1, harmonics + 1)}
    others = [value**2 for k, value in z.items() if k != 1]
    columns["fd_departure"] = math.sqrt(math.fsum(others)) / z[1]
    shares = [value / math.fsum(others) for value in others]
    columns["fd_entropy"] = -math.fsum(p * math.log2(p) for p in shares if p > 0)
    bend = [k**2 * (z[k] ** 2 + z[-k] ** 2) for k in range(1, top + 1)]
    columns["fd_harmonics_95"] = next(k for k in range(1, top + 1) if sum(bend[:k]) >= 0.95 * sum(bend) * (1 - 1e-12))
    return columns


# Hulls, callipers, rectangle, circle: everything tried


def cross(o, a, b):
    return (a[0] - o[0]) * (b[1] - o[1]) - (a[1] - o[1]) * (b[0] - o[0])


def hull(parts):
    """Corners of the convex hull, counter-clockwise, in rational numbers: the next corner has nothing to its right."""
    points = sorted({point for part in parts for point in exact(part[0])})
    corners = [points[0]]
    while True:
        here = corners[-1]
        candidate = next(point for point in points if point != here)
        for point in points:
            side = cross(here, candidate, point)
            farther = _square(here, point) > _square(here, candidate)
            if side < 0 or (side == 0 and farther):
                candidate = point
        if candidate == corners[0]:
            return corners
        corners.append(candidate)


def _square(a, b):
    return (a[0] - b[0]) ** 2 + (a[1] - b[1]) ** 2


def hull_area(corners):
    return abs(signed_area(corners))


def feret_max(corners):
    return math.sqrt(max(_square(a, b) for a, b in combinations(corners, 2)))


def feret_max_azimuths(corners, tolerance=1e-9):
    """Directions of all pairs that are as far apart as any, clockwise from the y axis, in [0, 180)."""
    longest = feret_max(corners)
    pairs = [pair for pair in combinations(corners, 2) if math.sqrt(_square(*pair)) >= longest * (1 - tolerance)]
    return sorted(math.degrees(math.atan2(float(b[0] - a[0]), float(b[1] - a[1]))) % 180.0 for a, b in pairs)


def _heights(a, b, corners):
    return [cross(a, b, point) for point in corners]


def feret_min(corners):
    """Smallest height over the edges, the width between two parallel lines that touch the hull."""
    return math.sqrt(min(max(_heights(a, b, corners)) ** 2 / _square(a, b) for a, b in edges(corners)))


def smallest_rectangle_area(corners):
    """Smallest over rectangles along each edge of the hull."""
    areas = []
    for a, b in edges(corners):
        along = [(b[0] - a[0]) * (p[0] - a[0]) + (b[1] - a[1]) * (p[1] - a[1]) for p in corners]
        areas.append((max(along) - min(along)) * max(_heights(a, b, corners)) / _square(a, b))
    return float(min(areas))


def _circle_of_three(a, b, c):
    twice = 2 * cross(a, b, c)
    if twice == 0:
        return None
    bx, by, cx, cy = b[0] - a[0], b[1] - a[1], c[0] - a[0], c[1] - a[1]
    bb, cc = bx**2 + by**2, cx**2 + cy**2
    x, y = a[0] + (cy * bb - by * cc) / twice, a[1] + (bx * cc - cx * bb) / twice
    return (x, y), _square((x, y), a)


def smallest_circle(corners):
    """Smallest circle through two or three corners, of those that hold all: (x, y, radius)."""
    circles = [(((a[0] + b[0]) / 2, (a[1] + b[1]) / 2), _square(a, b) / 4) for a, b in combinations(corners, 2)]
    circles += [circle for three in combinations(corners, 3) if (circle := _circle_of_three(*three))]
    holding = [c for c in circles if all(_square(c[0], point) <= c[1] for point in corners)]
    (x, y), square = min(holding, key=lambda circle: circle[1])
    return float(x), float(y), math.sqrt(square)
