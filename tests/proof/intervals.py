# SPDX-License-Identifier: GPL-3.0-or-later
"""Interval arithmetic in doubles, many intervals at once (numpy), and Taylor coefficients of second
order over it. Every operation is rounded outwards by one step of numpy.nextafter: sums, products,
quotients and square roots of doubles are correctly rounded (IEEE 754), so the true value is at most
half a step away. A result that is not known (division through zero, root of something negative) is
NaN, and no comparison with NaN verifies anything. Nothing here is shared with the service.
"""
from fractions import Fraction

import numpy as np

DOWN, UP = -np.inf, np.inf


def down(x):
    return np.nextafter(x, DOWN)


def up(x):
    return np.nextafter(x, UP)


class Iv:
    """[lo, hi], elementwise."""
    __slots__ = ("lo", "hi")
    __array_priority__ = 1000.0

    def __init__(self, lo, hi=None):
        self.lo = np.asarray(lo, float)
        self.hi = self.lo if hi is None else np.asarray(hi, float)

    @property
    def shape(self):
        return np.broadcast(self.lo, self.hi).shape

    def __getitem__(self, key):
        return Iv(self.lo[key], self.hi[key])

    def __neg__(self):
        return Iv(-self.hi, -self.lo)

    def __add__(self, other):
        if isinstance(other, Jet):
            return NotImplemented
        other = iv(other)
        return Iv(down(self.lo + other.lo), up(self.hi + other.hi))

    __radd__ = __add__

    def __sub__(self, other):
        if isinstance(other, Jet):
            return NotImplemented
        return self + (-iv(other))

    def __rsub__(self, other):
        if isinstance(other, Jet):
            return NotImplemented
        return (-self) + other

    def __mul__(self, other):
        if isinstance(other, Jet):
            return NotImplemented
        other = iv(other)
        if other.lo is other.hi:
            a, b = self.lo * other.lo, self.hi * other.lo
            return Iv(down(np.minimum(a, b)), up(np.maximum(a, b)))
        a, b = self.lo * other.lo, self.lo * other.hi
        c, d = self.hi * other.lo, self.hi * other.hi
        return Iv(down(np.minimum(np.minimum(a, b), np.minimum(c, d))),
                  up(np.maximum(np.maximum(a, b), np.maximum(c, d))))

    __rmul__ = __mul__

    def inverse(self):
        good = (self.lo > 0) | (self.hi < 0)
        with np.errstate(all="ignore"):
            return Iv(np.where(good, down(1.0 / self.hi), np.nan),
                      np.where(good, up(1.0 / self.lo), np.nan))

    def __truediv__(self, other):
        if isinstance(other, Jet):
            return NotImplemented
        return self * iv(other).inverse()

    def __rtruediv__(self, other):
        return iv(other) * self.inverse()

    def square(self):
        a, b = self.lo * self.lo, self.hi * self.hi
        least = np.maximum(down(np.minimum(a, b)), 0)
        least = np.where((self.lo <= 0) & (self.hi >= 0), 0.0, least)
        return Iv(np.where(np.isnan(a + b), np.nan, least), up(np.maximum(a, b)))

    def sqrt(self):
        with np.errstate(all="ignore"):
            good = self.lo >= 0
            return Iv(np.where(good, np.maximum(down(np.sqrt(self.lo)), 0.0), np.nan),
                      np.where(good, up(np.sqrt(self.hi)), np.nan))

    def mag(self):
        return np.maximum(np.abs(self.lo), np.abs(self.hi))

    def meet(self, other):
        """Both are known to hold the value."""
        return Iv(np.maximum(self.lo, other.lo), np.minimum(self.hi, other.hi))


def iv(x):
    """Numbers to intervals: fractions and whole numbers exactly enclosed, doubles taken as they
    are."""
    if isinstance(x, Iv):
        return x
    if isinstance(x, Fraction):
        near = float(x)
        exact = Fraction(near)
        return Iv(near if exact <= x else down(near), near if exact >= x else up(near))
    return Iv(x)


def stack(parts):
    """Intervals of like shape, one behind another along a new first axis."""
    shape = np.broadcast_shapes(*(p.shape for p in parts))
    return Iv(np.stack([np.broadcast_to(p.lo, shape) for p in parts]),
              np.stack([np.broadcast_to(p.hi, shape) for p in parts]))


PI = Iv(3.141592653589793, np.nextafter(3.141592653589793, 4.0))
HALF_PI = Iv(PI.lo / 2, PI.hi / 2)


def _coefficients(first):
    factorial, out = 1, []
    for k in range(first + 25):
        factorial *= max(k, 1)
        if k % 2 == first:
            out.append(iv(Fraction((-1) ** (k // 2), factorial)))
    return out


COEFFICIENTS = {first: _coefficients(first) for first in (0, 1)}
REST = Iv(-1e-26, 1e-26)  # 1 / 26! is smaller


def _series(x, first):
    """sin (first = 1) or cos (first = 0) for |x| <= 1: the alternating series to x^24 or x^25, and
    what follows is smaller than its first term left out."""
    s = x.square()
    total = COEFFICIENTS[first][-1]
    for c in reversed(COEFFICIENTS[first][:-1]):
        total = total * s + c
    total = total + REST
    return total * x if first else total


def sin_cos(x):
    """Of intervals: at the middle by the series, the rest by |sin'|, |cos'| <= 1."""
    x = iv(x)
    mid = np.asarray(0.5 * x.lo + 0.5 * x.hi)
    radius = np.maximum(up(x.hi - mid), up(mid - x.lo))
    turns = np.round(mid / 1.5707963267948966)
    small = Iv(mid) - Iv(turns) * HALF_PI  # |small| < 0.8
    s, c = _series(small, 1), _series(small, 0)
    quarter = np.mod(turns, 4)
    lo, hi = np.empty(mid.shape), np.empty(mid.shape)

    def pick(a, b, d, e):
        return Iv(np.choose(quarter.astype(int), [a.lo, b.lo, d.lo, e.lo], out=np.empty_like(lo)),
                  np.choose(quarter.astype(int), [a.hi, b.hi, d.hi, e.hi], out=np.empty_like(hi)))
    sine, cosine = pick(s, c, -s, -c), pick(c, -s, -c, s)
    wide = Iv(-radius, radius)
    half = up(up(radius * radius) * 0.5)
    bend = Iv(-half, half)
    one = Iv(-1.0, 1.0)
    return ((sine + cosine * wide + bend).meet(one), (cosine - sine * wide + bend).meet(one))


def angle_of(y, x):
    """An enclosure of atan2(y, x) for thin y, x: a guess, widened, and proved by its sine."""
    guess = np.arctan2(0.5 * (y.lo + y.hi), 0.5 * (x.lo + x.hi))
    size = np.hypot(y.mag(), x.mag())
    width = 4e-16 * (1 + np.abs(guess)) + 2 * ((y.hi - y.lo) + (x.hi - x.lo)) / size
    low, high = guess - width, guess + width
    (sl, cl), (sh, ch) = sin_cos(Iv(low)), sin_cos(Iv(high))
    good = ((y * cl - x * sl).lo >= 0) & ((y * ch - x * sh).hi <= 0)
    if not np.all(good):
        raise ArithmeticError("an angle was not enclosed")
    return Iv(low, high)


class Jet:
    """f, f', f''/2 at each of the points, which are intervals of the parameter themselves."""
    __slots__ = ("a", "b", "c")
    __array_priority__ = 2000.0

    def __init__(self, a, b, c):
        self.a, self.b, self.c = a, b, c

    @property
    def shape(self):
        return self.a.shape

    def __getitem__(self, key):
        return Jet(self.a[key], self.b[key], self.c[key])

    def __neg__(self):
        return Jet(-self.a, -self.b, -self.c)

    def __add__(self, other):
        if isinstance(other, Jet):
            return Jet(self.a + other.a, self.b + other.b, self.c + other.c)
        return Jet(self.a + other, self.b, self.c)

    __radd__ = __add__

    def __sub__(self, other):
        return self + (-other)

    def __rsub__(self, other):
        return (-self) + other

    def __mul__(self, other):
        if isinstance(other, Jet):
            return Jet(self.a * other.a, self.a * other.b + self.b * other.a,
                       self.a * other.c + self.b * other.b + self.c * other.a)
        other = iv(other)
        return Jet(self.a * other, self.b * other, self.c * other)

    __rmul__ = __mul__

    def square(self):
        return Jet(self.a.square(), self.a * self.b * 2.0, self.a * self.c * 2.0 + self.b.square())

    def inverse(self):
        r = self.a.inverse()
        b = -(self.b * r * r)
        return Jet(r, b, -((self.b * b + self.c * r) * r))

    def __truediv__(self, other):
        return self * (other.inverse() if isinstance(other, Jet) else iv(other).inverse())

    def sqrt(self):
        r = self.a.sqrt()
        half = 0.5 / r
        b = self.b * half
        return Jet(r, b, (self.c - b.square()) * half)


def jets(parts):
    return Jet(stack([p.a for p in parts]), stack([p.b for p in parts]),
               stack([p.c for p in parts]))


def dot(u, v):
    p = u * v
    total = p[0]
    for i in range(1, p.shape[0]):
        total = total + p[i]
    return total


def norm2(u):
    p = u.square()
    total = p[0]
    for i in range(1, p.shape[0]):
        total = total + p[i]
    return total


def cross(u, v):
    return jets([u[1] * v[2] - u[2] * v[1], u[2] * v[0] - u[0] * v[2], u[0] * v[1] - u[1] * v[0]])
